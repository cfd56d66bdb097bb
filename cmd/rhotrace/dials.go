package main

import (
	"encoding/json"
	"fmt"
	"io"
	"text/tabwriter"

	"github.com/urfave/cli/v2"

	"rhotrace/experiment"
)

func (s *session) dials() *cli.Command {
	return &cli.Command{
		Name:      "dials",
		Usage:     "list every number of an experiment file that can be turned",
		ArgsUsage: "FILE",
		Description: `
Lists every dial of an experiment file (- is standard input): its path, which
--turn, a scan or an unknown takes, its value, the range allowed and what it
means. Below stands which drives' running phases the frame of each level carries.`,
		Flags:  []cli.Flag{turnOption(), jsonOption(), helpOption()},
		Action: s.runDials,
	}
}

func (s *session) runDials(c *cli.Context) error {
	e, err := s.experimentOf(c)
	if err != nil {
		return err
	}
	s.warn(e.Warnings())
	if c.Bool("json") {
		return dialsJSON(s.out, e)
	}
	t := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
	fmt.Fprint(t, "dial\tvalue\trange\tmeaning\n")
	for _, d := range e.Dials() {
		v, err := e.Value(d.Path)
		if err != nil {
			return err
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\n", d.Path, d.Format(v), d.Range(), d.Doc)
	}
	fmt.Fprint(t, "\n")
	t.Flush()
	fmt.Fprint(t, "level\tframe\n")
	frames := e.Frames()
	for i, level := range e.Levels() {
		fmt.Fprintf(t, "%s\t%s\n", level, frames[i])
	}
	return t.Flush()
}

// dialsJSON writes the same as one object, in SI units.
func dialsJSON(w io.Writer, e *experiment.Experiment) error {
	type dial struct {
		Path    string  `json:"path"`
		Unit    string  `json:"unit"`
		Value   number  `json:"value"`
		Low     number  `json:"low"`  // null: no limit
		High    number  `json:"high"` // null: no limit
		Off     *number `json:"off"`  // null: none, or infinite
		Whole   bool    `json:"whole"`
		Meaning string  `json:"meaning"`
	}
	type level struct {
		Name  string `json:"name"`
		Frame string `json:"frame"`
	}
	var answer struct {
		Dials    []dial   `json:"dials"`
		Levels   []level  `json:"levels"`
		Warnings []string `json:"warnings"`
	}
	answer.Dials, answer.Warnings = []dial{}, append([]string{}, e.Warnings()...)
	for _, d := range e.Dials() {
		v, err := e.Value(d.Path)
		if err != nil {
			return err
		}
		answer.Dials = append(answer.Dials, dial{d.Path, d.Unit, number(v), number(d.Low), number(d.High), (*number)(d.Off), d.Whole, d.Doc})
	}
	frames := e.Frames()
	for i, name := range e.Levels() {
		answer.Levels = append(answer.Levels, level{name, frames[i]})
	}
	encoder := json.NewEncoder(w)
	encoder.SetEscapeHTML(false)
	return encoder.Encode(answer)
}
