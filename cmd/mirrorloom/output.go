package main

import (
	"context"

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
	if err := ctx.Err(); err != nil {
		return err
	}
	return d.Commit()
}
