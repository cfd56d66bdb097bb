package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"slices"
	"strings"

	"github.com/urfave/cli/v2"

	"rhotrace/cmd/rhotrace/internal/outfile"
	"rhotrace/experiment"
	"rhotrace/io/arrowfile"
	"rhotrace/io/figure"
	"rhotrace/io/table"
)

func (s *session) predict() *cli.Command {
	return &cli.Command{
		Name:      "predict",
		Usage:     "run the scan of an experiment file; save, draw or sum up the answer",
		ArgsUsage: "FILE",
		Description: `
Runs every point of the scans in an experiment file (- is standard input) and
sums up the answer. -o saves the table: Arrow, or CSV by the ending .csv; with
-o - it is streamed as Arrow to standard output. --figure draws it.

  rhotrace predict ramsey.toml -o ramsey.arrow --figure ramsey.png
  rhotrace predict ramsey.toml --turn drive.clock.detuning="250 Hz"`,
		Flags: []cli.Flag{
			&cli.StringFlag{Name: "o", Aliases: []string{"output"}, Usage: "save the table as `FILE`, .arrow or .csv; - streams Arrow"},
			&cli.StringFlag{Name: "figure", Usage: "draw the answer as `FILE`, .png, .svg or .pdf"},
			turnOption(),
			&cli.StringSliceFlag{Name: "trace", Usage: "lay the measured trace in `FILE` over the figure; may be repeated"},
			jsonOption(),
			helpOption(),
		},
		Action: s.runPredict,
	}
}

func jsonOption() cli.Flag {
	return &cli.BoolFlag{Name: "json", Usage: "print one JSON object with SI units, and nothing else"}
}

func (s *session) runPredict(c *cli.Context) error {
	if err := s.checkPredict(c); err != nil {
		return err
	}
	e, err := s.experimentOf(c)
	if err != nil {
		return err
	}
	traces, err := measured(e, c.StringSlice("trace"))
	if err != nil {
		return err
	}
	saved, drawn := c.String("o"), c.String("figure")
	if err := keepInputs(e, c, saved, drawn); err != nil {
		return err
	}
	s.note(traces)
	outputs, err := s.open(saved, drawn)
	if err != nil {
		return err
	}
	defer outputs.discard()
	t, err := s.compute(c.Context, e)
	if err != nil {
		return err
	}
	s.warn(t.Warnings)
	if outputs.figure != nil {
		f, err := draw(c.Context, e, t, traces)
		if err != nil {
			return fmt.Errorf("--figure %s: %w", drawn, err)
		}
		if err := written(outputs.figure, f.Write(outputs.figure, formatOf(drawn))); err != nil {
			return err
		}
	}
	if outputs.table != nil {
		if err := written(outputs.table, save(outputs.table, t, formatOf(saved))); err != nil {
			return err
		}
	}
	if err := c.Context.Err(); err != nil {
		return err
	}
	if err := outputs.commit(); err != nil {
		return err
	}
	switch {
	case saved == "-":
		return s.stream(t)
	case c.Bool("json"):
		return writeJSON(s.out, t)
	}
	return summarise(s.out, e, t, slices.DeleteFunc([]string{saved, drawn}, func(name string) bool { return name == "" }))
}

// checkPredict finds options that do not go together, before any work.
func (s *session) checkPredict(c *cli.Context) error {
	saved, drawn := c.String("o"), c.String("figure")
	switch ending := formatOf(saved); {
	case c.IsSet("o") && saved == "", c.IsSet("figure") && drawn == "":
		return mistaken("-o and --figure take the name of a file, and it is empty; name one or leave the option out")
	case saved == "-" && c.Bool("json"):
		return mistaken("-o - and --json both want standard output; leave one out")
	case saved == "-" && s.isTerminal(s.rawOut):
		return mistaken("-o -: Arrow is not written to a terminal; send it into a pipe or a file, or name one, as in -o out.arrow")
	case slices.Contains(figure.Formats, ending):
		return mistaken("-o %s: the table is saved as .arrow or .csv; to draw it write --figure %s", saved, saved)
	case ending != "" && ending != "arrow" && ending != "csv":
		return mistaken("-o %s: the ending .%s is not known; use .arrow or .csv", saved, ending)
	}
	switch {
	case drawn != "" && !slices.Contains(figure.Formats, formatOf(drawn)):
		return mistaken("--figure %s: the ending says the format; use .%s", drawn, strings.Join(figure.Formats, ", ."))
	case drawn == "" && c.IsSet("trace"):
		return mistaken("--trace lays a measured trace over a figure, and none is asked for; add --figure out.png")
	}
	return nil
}

// formatOf is the ending of a file name, in small letters, without the dot.
func formatOf(name string) string {
	return strings.ToLower(strings.TrimPrefix(filepath.Ext(name), "."))
}

// keepInputs refuses outputs that would replace what the experiment is made of,
// or one another.
func keepInputs(e *experiment.Experiment, c *cli.Context, outputs ...string) error {
	inputs := append([]string{c.Args().First()}, c.StringSlice("trace")...)
	if own, err := e.Traces(); err == nil {
		for _, t := range own {
			inputs = append(inputs, t.File)
		}
	}
	for _, out := range outputs {
		for _, in := range inputs {
			if out != "" && in != "-" && outfile.Same(out, in) {
				return mistaken("%s: is an input of this run and would be overwritten; name another output", out)
			}
		}
	}
	for i, out := range outputs {
		for _, other := range outputs[:i] {
			if out != "" && other != "" && outfile.Same(other, out) {
				return mistaken("%s and %s are one file; name two", other, out)
			}
		}
	}
	return nil
}

// targets are the files in the making; nil where none is asked for.
type targets struct{ table, figure, experiment *outfile.File }

// open prepares the files, so that one that cannot be written is found before
// the work.
func (s *session) open(saved, drawn string) (targets, error) {
	var o targets
	var err error
	if saved != "" && saved != "-" {
		if o.table, err = outfile.Create(saved); err != nil {
			return targets{}, err
		}
		if d := o.table.Device(); d != nil && s.isTerminal(d) && formatOf(saved) != "csv" {
			o.discard()
			return targets{}, mistaken("-o %s: Arrow is not written to a terminal; name a file, as in -o out.arrow", saved)
		}
	}
	if drawn != "" {
		if o.figure, err = outfile.Create(drawn); err != nil {
			o.discard()
			return targets{}, err
		}
	}
	return o, nil
}

func (o targets) list() (files []*outfile.File) {
	for _, f := range []*outfile.File{o.table, o.figure, o.experiment} {
		if f != nil {
			files = append(files, f)
		}
	}
	return files
}

func (o targets) commit() error { return outfile.Commit(o.list()...) }

func (o targets) discard() {
	for _, f := range o.list() {
		f.Discard()
	}
}

// compute runs the experiment under the eyes of whoever sits at a terminal.
func (s *session) compute(ctx context.Context, e *experiment.Experiment) (*table.Table, error) {
	var set experiment.Settings
	if s.isTerminal(s.errOut) {
		p := startProgress(s.errOut, "points")
		defer p.stop()
		set.Progress = p.report
	}
	return experiment.RunWith(ctx, e, set)
}

// written prefers the file's own error to what the writer made of it.
func written(f *outfile.File, err error) error {
	if own := f.Err(); own != nil {
		return own
	}
	return err
}

// save writes the table as CSV or, by default, Arrow.
func save(w io.Writer, t *table.Table, format string) error {
	if format == "csv" {
		return t.WriteCSV(w)
	}
	return arrowfile.Write(w, t)
}

// stream writes the table as an Arrow stream to standard output.
func (s *session) stream(t *table.Table) error {
	err := arrowfile.WriteStream(s.out, t)
	if own := s.out.Flush(); own != nil { // without what the writer put round it
		return outputError(own)
	}
	return err
}
