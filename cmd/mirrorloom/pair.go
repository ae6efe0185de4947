package main

import (
	"context"
	"fmt"
	"io"
	"os"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

type pairOptions struct {
	sequence string
	file     string
	replace  bool
	all      bool
	audit    bool
}

func (o *pairOptions) addFlags(f *pflag.FlagSet) {
	f.StringVar(&o.sequence, "sequence", "", "folder of the sequence, as plan wrote it")
	f.StringVarP(&o.file, "output", "o", "", "write the ledger to this CSV file as well")
	f.BoolVar(&o.replace, "replace", false, "replace the file if it holds something")
	f.BoolVar(&o.audit, "audit", false, "find out from the frames' light which masks they show, and correct the pairing by it")
	f.BoolVar(&o.all, "all", false, "list every frame, not only those with a fault")
}

func newPairCommand(a *app) *cobra.Command {
	var o pairOptions
	cmd := &cobra.Command{
		Use:   "pair NIGHT --sequence SEQ [--audit] [-o FILE.csv]",
		Short: "Pair the frames of a night with the steps of a sequence",
		Args:  arguments("NIGHT, the folder of the frames"),
		RunE:  func(cmd *cobra.Command, args []string) error { return runPair(cmd.Context(), a, args[0], o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

func runPair(ctx context.Context, a *app, night string, o pairOptions) error {
	if err := lacking("pair", needed{"--sequence", o.sequence}); err != nil {
		return err
	}
	if info, err := os.Stat(o.file); err == nil && info.Mode().IsRegular() && info.Size() > 0 && !o.replace {
		return fmt.Errorf("the output file is not empty: %s; choose another with -o or pass --replace", o.file)
	}
	seq, err := sequence.Read(ctx, o.sequence)
	if err != nil {
		return err
	}
	draw := a.progress()
	opts := pair.Options{Night: night, Audit: o.audit, AuditProgress: func(done, total int) { draw("audit", done, total) }}
	paired, err := pair.Run(ctx, seq, opts, func(done, total int) { draw("pair", done, total) })
	if err != nil {
		return err
	}
	if o.file != "" {
		if err := fitsutil.WriteAtomic(o.file, paired.Ledger.WriteCSV); err != nil {
			return err
		}
	}
	answer := struct {
		Ledger product.Ledger `json:"ledger"`
		Audit  *pair.Audit    `json:"audit,omitempty"`
	}{paired.Ledger, paired.Audit}
	return a.answer(answer, func(w io.Writer) error {
		if err := pair.Print(w, paired.Ledger, o.all); err != nil {
			return err
		}
		return paired.Audit.Print(w)
	})
}
