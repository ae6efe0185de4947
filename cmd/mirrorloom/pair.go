package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"strings"

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
		Long: `pair compares the headers of a night's frames with the steps of the sequence and says
which frame serves which step, what is missing and what cannot be used. With --audit it
looks at the frames' light as well: the dark columns of the code tell which mask a science
frame shows, whatever its header says.

The exit code is 3 where a step has no frame that can be used.`,
		Args: arguments("NIGHT, the folder of the frames"),
		RunE: func(cmd *cobra.Command, args []string) error { return runPair(cmd.Context(), a, args[0], o) },
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
	err = a.answer(answer, func(w io.Writer) error {
		if err := pair.Print(w, paired.Ledger, o.all); err != nil {
			return err
		}
		if err := paired.Audit.Print(w, paired.Ledger, o.all); err != nil {
			return err
		}
		_, err := io.WriteString(w, headersAlone(seq, o.audit))
		return err
	})
	if err != nil {
		return err
	}
	if why := paired.Unserved(); len(why) > 0 {
		return degradedError{"the night is not whole: " + strings.Join(why, "; ")}
	}
	return nil
}

// headersAlone hints at the audit where only headers were believed, and it could tell more.
func headersAlone(seq *sequence.Sequence, audited bool) string {
	if audited || len(seq.DarkColumns()) == 0 {
		return ""
	}
	return "\nOnly headers were compared; --audit tells from the frames' light whether each shows its mask.\n"
}
