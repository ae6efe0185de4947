package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"os/signal"
	"syscall"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
	"github.com/spf13/cobra"
	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// TestMain lets testscript files run this test binary as mirrorloom.
func TestMain(m *testing.M) {
	testscript.Main(tidy{m}, map[string]func(){
		"mirrorloom": func() {
			ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
			code := run(ctx, os.Args[1:], os.Stdout, os.Stderr)
			stop()
			os.Exit(code)
		},
	})
}

// tidy removes what the tests shared.
type tidy struct{ *testing.M }

func (m tidy) Run() int {
	code := m.M.Run()
	for _, dir := range []string{tinyDir, lampsDir} {
		if dir != "" {
			_ = os.RemoveAll(dir) // in the system's folder for such files
		}
	}
	return code
}

func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata",
		RequireExplicitExec: true,
		Cmds:                scriptCommands(outside.Root(t)),
		Condition:           condition,
	})
}

// Every command parses its flags without a clash between its own and the
// shared ones: pflag panics on a clash.
func TestFlagsDoNotClash(t *testing.T) {
	root, _ := newRootCommand(&app{stdout: &bytes.Buffer{}, stderr: &bytes.Buffer{}})
	var walk func(c *cobra.Command)
	walk = func(c *cobra.Command) {
		require.NotPanics(t, func() { c.InitDefaultHelpFlag(); require.NoError(t, c.ParseFlags(nil)) }, c.Name())
		require.NotEmpty(t, c.Short, c.Name())
		for _, sub := range c.Commands() {
			walk(sub)
		}
	}
	walk(root)
}

func TestVersionAsJSON(t *testing.T) {
	var stdout, stderr bytes.Buffer
	require.Equal(t, exitWhole, run(context.Background(), []string{"version", "--json"}, &stdout, &stderr))
	var got map[string]string
	require.NoError(t, json.Unmarshal(stdout.Bytes(), &got))
	require.NotEmpty(t, got["version"])
	require.Empty(t, stderr.String())
}
