package main

import (
	"context"
	"errors"
	"fmt"
	"io"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/nightsheet"
	"mirrorloom/pipeline/plan"
)

type planOptions struct {
	profile string
	// registration is a file that reduce wrote.
	registration string
	list         bool
	dryRun       bool
	compare      bool
	output       outputOptions
}

func (o *planOptions) addFlags(f *pflag.FlagSet) {
	f.StringVar(&o.profile, "profile", "", "instrument profile: a YAML file, or the name of a built-in one")
	f.StringVar(&o.registration, "registration", "", "registration.yaml of a run on listed stars: the field lies where it says")
	f.BoolVar(&o.list, "list-profiles", false, "list the built-in profiles and stop")
	f.BoolVar(&o.dryRun, "dry-run", false, "plan and print, write no sequence")
	f.BoolVar(&o.compare, "compare", false, "compare two plans, each the folder of a sequence or a target, and write nothing")
	o.output.addFlags(f, "sequence")
}

func newPlanCommand(a *app) *cobra.Command {
	var o planOptions
	cmd := &cobra.Command{
		Use:   "plan TARGET.yaml --profile P -o SEQ",
		Short: "Plan the exposures and masks of a target",
		Long: `plan writes a sequence: the exposures of a night with their masks, and copies of
the profile and the target it was made from. Every later command needs only the
sequence.

plan.html in it is the night sheet: two printable pages of A4 with where to point, the
time, the limits, the field, the forecast and the steps. plan.json has all of it for
programs.

Where the target has a forecast, plan also says what S/N it will give, and holds the
code against others and against a slit scan of the same field in the same time; the
table is trade.csv in the sequence, the plot trade.svg. With code.family: auto plan
takes the best within the target's limits.

plan --compare A B holds two plans side by side, each the folder of a sequence or a
target.`,
		Args: func(cmd *cobra.Command, args []string) error {
			if o.list {
				return arguments()(cmd, args)
			}
			if o.compare {
				return arguments("a first plan", "a second one to compare it with")(cmd, args)
			}
			return arguments("TARGET.yaml, or the name of a built-in target")(cmd, args)
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if o.list {
				return runListProfiles(a)
			}
			if o.compare {
				return runComparePlans(cmd.Context(), a, args[0], args[1], o)
			}
			return runPlan(cmd.Context(), a, args[0], o)
		},
	}
	o.addFlags(cmd.Flags())
	return cmd
}

func runListProfiles(a *app) error {
	names := instrument.Names()
	answer := struct {
		Profiles []string `json:"profiles"`
	}{names}
	return a.answer(answer, func(w io.Writer) error {
		for _, name := range names {
			if _, err := fmt.Fprintln(w, name); err != nil {
				return err
			}
		}
		return nil
	})
}

func runComparePlans(ctx context.Context, a *app, first, second string, o planOptions) error {
	if o.output.dir != "" || o.dryRun || o.registration != "" {
		return usageError{errors.New("--compare plans nothing to be written; leave -o, --dry-run and --registration out")}
	}
	c, err := plan.Compare(ctx, first, second, o.profile)
	if err != nil {
		return err
	}
	return a.answer(c, func(w io.Writer) error {
		_, err := fmt.Fprint(w, c)
		return err
	})
}

func runPlan(ctx context.Context, a *app, target string, o planOptions) error {
	needs := []needed{{"--profile", o.profile}}
	if !o.dryRun {
		needs = append(needs, needed{"-o", o.output.dir})
	}
	if err := lacking("plan", needs...); err != nil {
		return err
	}
	if o.output.dir != "" && o.dryRun {
		return usageError{errors.New("--dry-run writes nothing and -o says where; leave one of the two out")}
	}
	inputs := []string{target, o.profile}
	if o.registration != "" {
		inputs = append(inputs, o.registration)
	}
	var summary *plan.Summary
	run := func(dir string) (err error) {
		summary, err = plan.Run(ctx, plan.Options{Target: target, Profile: o.profile, Registration: o.registration, Out: dir, Sheet: nightsheet.Write})
		return err
	}
	var err error
	if o.dryRun {
		err = run("")
	} else {
		err = o.output.write(ctx, run, inputs...)
	}
	if err != nil {
		return err
	}
	return a.answer(summary, func(w io.Writer) error {
		_, err := fmt.Fprint(w, summary)
		return err
	})
}
