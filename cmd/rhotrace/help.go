package main

import (
	"fmt"
	"io"
	"strings"
	"text/tabwriter"

	"github.com/urfave/cli/v2"
)

const helpName = "help"

// helpOption stands on every verb. It never reaches the command-line library,
// which would answer it in its own way.
func helpOption() cli.Flag {
	return &cli.BoolFlag{Name: helpName, Aliases: []string{"h"}, Usage: "print this and stop"}
}

// overview prints what there is.
func (s *session) overview(w io.Writer) {
	fmt.Fprint(w, `rhotrace predicts what a few-level atom driven with light shows, from a file
that describes levels, drives, decays, a sequence of steps and a scan.

Usage: rhotrace VERB [options] FILE

`)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, verb := range s.verbs {
		if !verb.Hidden {
			fmt.Fprintf(t, "  %s\t%s\n", verb.Name, verb.Usage)
		}
	}
	t.Flush()
	fmt.Fprint(w, `
Options and files may stand in any order; -- ends the options, and - is standard
input or output. Exit status: 0 done, 1 the work failed, 2 the command line or a
file is wrong. `+"`rhotrace VERB --help`"+` tells more about a verb.
`)
}

// help prints what a verb does and its options.
func help(w io.Writer, verb *cli.Command) {
	fmt.Fprintf(w, "Usage: %s\n\n%s\n\n", strings.TrimSpace("rhotrace "+verb.Name+" [options] "+verb.ArgsUsage), strings.TrimSpace(verb.Description))
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, flag := range verb.Flags {
		placeholder, text := usage(flag)
		fmt.Fprintf(t, "  %s\t%s\n", strings.TrimSpace(list(optionNames(flag))+" "+placeholder), text)
	}
	t.Flush()
}
