package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
	"go.uber.org/zap"
)

// app is what every command shares: where it speaks, and how loudly.
type app struct {
	stdout, stderr io.Writer
	json           bool
	logLevel       string
	logFile        string
	log            *zap.Logger
	profiles       profiles
}

func (a *app) addFlags(f *pflag.FlagSet) {
	f.BoolVar(&a.json, "json", false, "print the answer as one JSON object")
	f.StringVar(&a.logLevel, "log-level", "warn", "messages from this level on: debug, info, warn or error")
	f.StringVar(&a.logFile, "log-file", "", "write the messages to this file as JSON lines, instead of standard error")
	a.profiles.addFlags(f)
}

// answer prints what a command found: as JSON if asked, else as words.
func (a *app) answer(v any, words func(w io.Writer) error) error {
	if !a.json {
		return words(a.stdout)
	}
	enc := json.NewEncoder(a.stdout)
	enc.SetIndent("", "  ")
	if err := enc.Encode(v); err != nil {
		return fmt.Errorf("print the answer as JSON: %w", err)
	}
	return nil
}

// run is the whole program but for the process around it.
func run(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	a := &app{stdout: stdout, stderr: stderr, log: zap.NewNop()}
	root, started := newRootCommand(a)
	root.SetArgs(args)
	err := root.ExecuteContext(ctx)
	if failed := a.profiles.end(); failed != nil && err == nil {
		err = failed
	}
	if err != nil && !*started {
		// cobra found the mistake before any command began to work.
		err = usageError{err}
	}
	// A log that cannot be flushed to a terminal is no failure of the run.
	_ = a.log.Sync()
	return exitCode(ctx, err, stderr)
}

// newRootCommand builds the command tree. The second result tells whether a
// command began to work, which separates wrong usage from failed work.
func newRootCommand(a *app) (*cobra.Command, *bool) {
	started := new(bool)
	root := &cobra.Command{
		Use:   "mirrorloom",
		Short: "Plan, rehearse and reduce Hadamard-multiplexed exposures of a micromirror spectrograph",
		Long: `mirrorloom plans, rehearses and reduces Hadamard-multiplexed exposures of a
spectrograph whose slit is a digital micromirror device (DMD).

Exit codes: 0 whole; 1 error, nothing written; 2 wrong usage; 3 written, but
not whole; 130 interrupted.`,
		SilenceUsage:  true,
		SilenceErrors: true,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return unknownCommand(cmd, args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error {
			if err := cmd.Help(); err != nil {
				return err
			}
			return usageError{errors.New("no command given")}
		},
		PersistentPreRunE: func(*cobra.Command, []string) error {
			log, err := newLogger(a.logLevel, a.logFile, a.stderr)
			if err != nil {
				return err
			}
			a.log = log
			*started = true
			return a.profiles.start()
		},
	}
	root.SetOut(a.stdout)
	root.SetErr(a.stderr)
	root.SetFlagErrorFunc(wrongFlag)
	a.addFlags(root.PersistentFlags())
	root.AddCommand(newPlanCommand(a), newRehearseCommand(a), newPairCommand(a), newReduceCommand(a), newCombineCommand(a), newExtractCommand(a), newViewCommand(a), newDemoCommand(a), newVersionCommand(a))
	return root, started
}
