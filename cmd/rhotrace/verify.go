package main

import (
	"encoding/json"
	"fmt"

	"github.com/urfave/cli/v2"

	"rhotrace/validation"
)

func (s *session) verify() *cli.Command {
	return &cli.Command{
		Name:  "verify",
		Usage: "recompute published results and compare",
		Description: `
Recomputes published results on this machine, each by the path that your own
experiments take, and prints what is expected, what was found, the difference,
how much of one is allowed, and the source. Exit status 1 if one differs by more.`,
		Flags:  []cli.Flag{jsonOption(), helpOption()},
		Action: s.runVerify,
	}
}

func (s *session) runVerify(c *cli.Context) error {
	if c.Args().Present() {
		return mistaken("verify takes no file, and there is %s; leave it out", list(c.Args().Slice()))
	}
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
	for _, check := range validation.Checks() {
		o := check.Run(c.Context)
		if err := c.Context.Err(); err != nil {
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
		if c.Bool("json") {
			continue
		}
		verdict := "ok  "
		if !o.Passed {
			verdict = "FAIL"
		}
		fmt.Fprintf(s.out, "%s %s\n     found %.12g, expected %.12g, off by %.1e of %.1e allowed: %s\n     %s (%s)\n",
			verdict, o.Name, o.Value, o.Expected, o.Value-o.Expected, o.Tolerance, o.Why, o.Source, o.Status)
		if o.Err != nil {
			fmt.Fprintf(s.out, "     %s\n", oneLine(o.Err.Error()))
		}
	}
	if c.Bool("json") {
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
