package main

import (
	"context"
	"errors"

	"github.com/spf13/pflag"

	"mirrorloom/pipeline/outdir"
)

// outputOptions are those of every command that writes a folder.
type outputOptions struct {
	dir     string
	replace bool
}

func (o *outputOptions) addFlags(f *pflag.FlagSet, what string) {
	f.StringVarP(&o.dir, "output", "o", "", "folder to write the "+what+" into")
	f.BoolVar(&o.replace, "replace", false, "replace the folder if it holds something; the old one stays until the new is whole")
}

// write gives work a folder that appears under its name only when work has
// succeeded and ctx still lives. The inputs are what work reads.
func (o *outputOptions) write(ctx context.Context, work func(dir string) error, inputs ...string) error {
	d, err := outdir.Begin(o.dir, o.replace, inputs...)
	if err != nil {
		return err
	}
	defer d.Abort()
	if err := work(d.Path()); err != nil {
		return err
	}
	return o.commit(ctx, d)
}

// resume is write for work that goes on with what an earlier run left in the folder; where
// it fails and canResume says so, it is left there again.
func (o *outputOptions) resume(ctx context.Context, work func(dir string) error, canResume func(dir string) bool, inputs ...string) error {
	d, err := outdir.Resume(o.dir, o.replace, inputs...)
	if err != nil {
		return err
	}
	defer d.Abort()
	if err := work(d.Path()); err != nil {
		if !canResume(d.Path()) {
			return err
		}
		return leftError{err: errors.Join(err, d.Leave()), dir: d.Path()}
	}
	return o.commit(ctx, d)
}

func (o *outputOptions) commit(ctx context.Context, d *outdir.Dir) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	return d.Commit()
}
