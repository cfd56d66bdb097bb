package main

import (
	"context"
	"encoding/json"
	"fmt"
	"math"

	"github.com/urfave/cli/v2"

	"rhotrace/validation"
)

// verifyLine is a line of at most 120 columns, since names and sources of checks
// have at most 33 and 37 characters.
const verifyLine = "%-4s %-33s %11s %11s %8s %7s  %s\n"

// significant writes a number with seven digits, in eleven columns.
func significant(v float64) string {
	if v != 0 && math.Abs(v) < 0.001 {
		return fmt.Sprintf("%.4e", v)
	}
	return fmt.Sprintf("%.7g", v)
}

func (s *session) verify() *cli.Command {
	return &cli.Command{
		Name:  "verify",
		Usage: "recompute published results and compare",
		Description: `
Recomputes published results on this machine, each by the path that your own
experiments take, and prints what is expected, what was found, the difference,
how much of one is allowed, and the source, a line each. --json adds why so much
is allowed, and how the expected value is known. Exit status 1 if one differs by
more.`,
		Flags:  []cli.Flag{jsonOption(), helpOption()},
		Action: s.runVerify,
	}
}

func (s *session) runVerify(c *cli.Context) error {
	if c.Args().Present() {
		return mistaken("verify takes no file, and there is %s; leave it out", list(c.Args().Slice()))
	}
	return s.compare(c.Context, validation.Checks(), c.Bool("json"))
}

// compare runs checks and prints them, as they come or as one JSON object.
func (s *session) compare(ctx context.Context, checks []validation.Check, asJSON bool) error {
	type line struct {
		Name       string `json:"name"`
		Source     string `json:"source"`
		Status     string `json:"status"`
		Expected   number `json:"expected"`
		Found      number `json:"found"`
		Difference number `json:"difference"`
		Tolerance  number `json:"tolerance"`
		Why        string `json:"why"`
		Passed     bool   `json:"passed"`
		Error      string `json:"error,omitempty"`
	}
	var lines []line
	bad := 0
	if !asJSON {
		fmt.Fprintf(s.out, verifyLine, "", "check", "expected", "found", "off by", "allowed", "source")
	}
	for _, check := range checks {
		o := check.Run(ctx)
		if err := ctx.Err(); err != nil {
			return err
		}
		l := line{o.Name, o.Source, string(o.Status), number(o.Expected), number(o.Value), number(o.Value - o.Expected), number(o.Tolerance), o.Why, o.Passed, ""}
		if o.Err != nil {
			l.Error = o.Err.Error()
		}
		if !o.Passed {
			bad++
		}
		lines = append(lines, l)
		if asJSON {
			continue
		}
		verdict := "ok"
		if !o.Passed {
			verdict = "FAIL"
		}
		difference := fmt.Sprintf("%.1e", o.Value-o.Expected)
		if o.Err != nil {
			difference = "-"
		}
		fmt.Fprintf(s.out, verifyLine, verdict, o.Name, significant(o.Expected), significant(o.Value), difference, fmt.Sprintf("%.1e", o.Tolerance), o.Source)
		if o.Err != nil {
			fmt.Fprintf(s.out, "     %s\n", oneLine(o.Err.Error()))
		} else if !o.Passed {
			fmt.Fprintf(s.out, "     allowed is: %s\n", o.Why)
		}
	}
	if asJSON {
		err := json.NewEncoder(s.out).Encode(map[string]any{"checks": lines, "passed": len(lines) - bad, "failed": bad})
		if err != nil {
			return err
		}
	} else {
		fmt.Fprintf(s.out, "\n%d checks passed, %d failed\n", len(lines)-bad, bad)
	}
	if bad > 0 {
		return fmt.Errorf("verify: %d of %d checks failed; do not trust results of this build, and report the lines marked FAIL", bad, len(lines))
	}
	return nil
}
