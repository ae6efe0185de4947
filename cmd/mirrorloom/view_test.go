package main

import (
	"bufio"
	"encoding/json"
	"io"
	"net/http"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// view prints one address of the loopback, answers there, and ends by a signal with exit
// code 0 and no part of a file left.
func TestView(t *testing.T) {
	dir := tiny(t)
	run := filepath.Join(dir, "run")
	runOver(t, run, "reduce", filepath.Join(dir, "night"), "--sequence", filepath.Join(dir, "seq"), "--recipe", "nominal")
	for _, c := range []struct {
		signal syscall.Signal
		json   bool
	}{{syscall.SIGINT, false}, {syscall.SIGTERM, true}} {
		args := []string{"view", run}
		if c.json {
			args = append(args, "--json")
		}
		cmd := exec.Command("mirrorloom", args...)
		var stderr strings.Builder
		cmd.Stderr = &stderr
		stdout, err := cmd.StdoutPipe()
		require.NoError(t, err)
		require.NoError(t, cmd.Start())
		url := printedURL(t, stdout, c.json)
		require.Regexp(t, `^http://127\.0\.0\.1:\d+/$`, url)
		answer, err := http.Get(url + "api/run")
		require.NoError(t, err)
		text, err := io.ReadAll(answer.Body)
		require.NoError(t, err)
		require.NoError(t, answer.Body.Close())
		require.Equal(t, http.StatusOK, answer.StatusCode)
		require.True(t, json.Valid(text))
		sent := time.Now()
		require.NoError(t, cmd.Process.Signal(c.signal))
		require.NoError(t, cmd.Wait(), stderr.String())
		require.Less(t, time.Since(sent), 10*time.Second)
		require.Empty(t, stderr.String())
		for _, name := range listing(t, filepath.Join(run, ".cache")) {
			require.False(t, strings.HasPrefix(name, "."), name)
		}
	}
}

// printedURL reads what view prints when it answers.
func printedURL(t *testing.T, stdout io.Reader, asJSON bool) string {
	t.Helper()
	if !asJSON {
		line, err := bufio.NewReader(stdout).ReadString('\n')
		require.NoError(t, err)
		return strings.TrimSpace(line)
	}
	var answer viewAnswer
	require.NoError(t, json.NewDecoder(stdout).Decode(&answer))
	require.NotEmpty(t, answer.Cache.Folder)
	return answer.URL
}
