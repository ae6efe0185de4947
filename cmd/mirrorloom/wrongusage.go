package main

import (
	"errors"
	"fmt"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/config"
)

// helpOf says where a command's flags and arguments are explained.
func helpOf(cmd *cobra.Command) string {
	return fmt.Sprintf("see '%s --help'", cmd.CommandPath())
}

// wrongFlag makes a sentence of what pflag found wrong: for a flag that the command has not,
// the one that was meant, if one is near.
func wrongFlag(cmd *cobra.Command, err error) error {
	var unknown *pflag.NotExistError
	if !errors.As(err, &unknown) {
		return fmt.Errorf("%w; %s", err, helpOf(cmd))
	}
	if letters := unknown.GetSpecifiedShortnames(); letters != "" {
		return fmt.Errorf("-%s is no flag of %s; a word of several letters takes two dashes; %s", letters, cmd.CommandPath(), helpOf(cmd))
	}
	name := unknown.GetSpecifiedName()
	if near := nearFlags(cmd, name); len(near) > 0 {
		return fmt.Errorf("unknown flag: --%s; did you mean %s? %s", name, strings.Join(near, " or "), helpOf(cmd))
	}
	return fmt.Errorf("unknown flag: --%s; %s", name, helpOf(cmd))
}

// nearFlags are the flags that a misspelt one may stand for: those of the least edit
// distance, up to two letters, or else those that go on where it ends.
func nearFlags(cmd *cobra.Command, name string) []string {
	const farthest = 2 // letters; more make other words
	best, nearest := farthest, []string(nil)
	var longer []string
	cmd.Flags().VisitAll(func(f *pflag.Flag) {
		if f.Hidden {
			return
		}
		if name != "" && strings.HasPrefix(f.Name, name) {
			longer = append(longer, "--"+f.Name)
		}
		switch d := config.EditDistance(name, f.Name); {
		case d >= len(name): // no letter in common
		case d < best:
			best, nearest = d, []string{"--" + f.Name}
		case d == best:
			nearest = append(nearest, "--"+f.Name)
		}
	})
	if len(nearest) > 0 {
		return nearest
	}
	return longer
}

// arguments demands one argument for each name, and names those that are missing.
func arguments(names ...string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		switch {
		case len(args) < len(names):
			return fmt.Errorf("%s needs %s; %s", cmd.CommandPath(), strings.Join(names[len(args):], " and "), helpOf(cmd))
		case len(args) > len(names) && len(names) == 0:
			return fmt.Errorf("%s takes no argument, and %q is one; %s", cmd.CommandPath(), args[0], helpOf(cmd))
		case len(args) > len(names):
			return fmt.Errorf("%s takes %s alone, and %q stands behind; quote what has spaces in it; %s",
				cmd.CommandPath(), strings.Join(names, " and "), args[len(names)], helpOf(cmd))
		}
		return nil
	}
}

// unknownCommand names the command that a misspelt one may stand for.
func unknownCommand(root *cobra.Command, name string) error {
	root.SuggestionsMinimumDistance = 2
	if near := root.SuggestionsFor(name); len(near) > 0 {
		return fmt.Errorf("unknown command %q; did you mean %s? %s", name, strings.Join(near, " or "), helpOf(root))
	}
	return fmt.Errorf("unknown command %q; %s", name, helpOf(root))
}

// needed is a flag that a command cannot do without, and what it was given.
type needed struct{ flag, value string }

// lacking is the usage error that names those of the flags which were not given, nil if all
// were.
func lacking(command string, flags ...needed) error {
	var absent []string
	for _, f := range flags {
		if f.value == "" {
			absent = append(absent, f.flag)
		}
	}
	if len(absent) == 0 {
		return nil
	}
	return usageError{fmt.Errorf("%s needs %s; see 'mirrorloom %s --help'", command, strings.Join(absent, " and "), command)}
}
