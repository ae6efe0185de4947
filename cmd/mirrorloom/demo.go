package main

import (
	"context"
	"io"

	"github.com/spf13/cobra"

	"mirrorloom/pipeline/demo"
)

func newDemoCommand(a *app) *cobra.Command {
	var o outputOptions
	cmd := &cobra.Command{
		Use:   "demo -o DIR",
		Short: "Plan, rehearse and reduce an invented field, and compare with the truth",
		Args:  arguments(),
		RunE:  func(cmd *cobra.Command, _ []string) error { return runDemo(cmd.Context(), a, o) },
	}
	o.addFlags(cmd.Flags(), "demo")
	return cmd
}

func runDemo(ctx context.Context, a *app, o outputOptions) error {
	if err := lacking("demo", needed{"-o", o.dir}); err != nil {
		return err
	}
	var result *demo.Result
	err := o.write(ctx, func(dir string) (err error) {
		result, err = demo.Run(ctx, demo.Options{Out: dir, Log: a.log, Progress: a.progress()})
		return err
	})
	if err != nil {
		return err
	}
	err = a.answer(result, func(w io.Writer) error {
		_, err := io.WriteString(w, result.Words(o.dir))
		return err
	})
	if err != nil {
		return err
	}
	return unlessWhole(result.Degraded)
}
