package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/urfave/cli/v2"

	"rhotrace/cmd/rhotrace/internal/outfile"
	"rhotrace/experiment"
	"rhotrace/fit"
	"rhotrace/io/figure"
)

func (s *session) fit() *cli.Command {
	return &cli.Command{
		Name:      "fit",
		Usage:     "find the unknowns of an experiment file from measured traces",
		ArgsUsage: "FILE TRACE…",
		Description: `
Fits every [unknown.NAME] of the experiment file to the traces that its
[trace.NAME] blocks name, and to those given behind it, all at once. Prints each
unknown as value(error): the digits in brackets are the standard error of the
last digits shown. Doubts are said in words on standard error.

  rhotrace fit ramsey.toml
  rhotrace fit ramsey.toml monday.csv -o fit.arrow --figure fit.png`,
		Flags: []cli.Flag{
			&cli.StringFlag{Name: "o", Aliases: []string{"output"}, Usage: "save data, model and residuals as `FILE`, .arrow or .csv"},
			&cli.StringFlag{Name: "figure", Usage: "draw data, model and residuals as `FILE`, .png, .svg or .pdf"},
			&cli.StringFlag{Name: "save", Usage: "write the experiment with the fitted values as `FILE`"},
			turnOption(),
			jsonOption(),
			helpOption(),
		},
		Action: s.runFit,
	}
}

func (s *session) runFit(c *cli.Context) error {
	if err := s.checkPredict(c); err != nil {
		return err
	}
	if c.String("o") == "-" {
		return mistaken("-o -: the table of a fit goes into a file; name one, as in -o fit.arrow")
	}
	if kept := c.String("save"); c.IsSet("save") && formatOf(kept) != "toml" {
		return mistaken("--save %s: the experiment with the fitted values is saved as a .toml file; name one, as in --save fitted.toml", kept)
	}
	files := c.Args().Slice()
	if len(files) == 0 {
		return mistaken("fit: no file is given; write `rhotrace fit FILE TRACE…`")
	}
	e, err := s.readExperiment(c.Context, files[0])
	if err != nil {
		return err
	}
	if e, err = edited(e, c.StringSlice("turn")); err != nil {
		return err
	}
	traces, err := e.Traces(files[1:]...)
	if err != nil {
		return unread(err)
	}
	saved, drawn, kept := c.String("o"), c.String("figure"), c.String("save")
	for _, t := range traces {
		for _, out := range []string{saved, drawn, kept} {
			if out != "" && outfile.Same(out, t.File) {
				return mistaken("%s: is an input of this run and would be overwritten; name another output", out)
			}
		}
	}
	if err := keepInputs(e, c, saved, drawn, kept); err != nil {
		return err
	}
	outputs, err := s.open(saved, drawn)
	if err != nil {
		return err
	}
	defer func() { outputs.discard() }()
	if kept != "" {
		if outputs.experiment, err = outfile.Create(kept); err != nil {
			return err
		}
	}
	var set fit.TraceSettings
	if s.isTerminal(s.errOut) {
		p := startProgress(s.errOut, "places")
		defer p.stop()
		set.Progress = p.report
	}
	a, err := fit.Traces(c.Context, e, traces, set)
	if err != nil {
		return unread(err)
	}
	s.note(traces)
	s.warn(append(e.Warnings(), a.Warnings...))
	if outputs.figure != nil {
		f, err := drawFit(c, e, a)
		if err != nil {
			return fmt.Errorf("--figure %s: %w", drawn, err)
		}
		if err := written(outputs.figure, f.Write(outputs.figure, formatOf(drawn))); err != nil {
			return err
		}
	}
	if outputs.table != nil {
		if err := written(outputs.table, save(outputs.table, a.Table(), formatOf(saved))); err != nil {
			return err
		}
	}
	if outputs.experiment != nil {
		if own, err := e.Traces(); err == nil && len(own) > 0 && filepath.Dir(kept) != filepath.Dir(files[0]) {
			s.warn([]string{fmt.Sprintf("%s names its traces as %s does, and lies in another folder; put it or the traces where they belong", kept, files[0])})
		}
		_, err := outputs.experiment.Write(a.Fitted.Text())
		if err := written(outputs.experiment, err); err != nil {
			return err
		}
	}
	if err := c.Context.Err(); err != nil {
		return err
	}
	if err := outputs.commit(); err != nil {
		return err
	}
	if c.Bool("json") {
		return fitJSON(s.out, a)
	}
	return printFit(s.out, a)
}

// printFit prints the unknowns for people.
func printFit(w io.Writer, a *fit.Answer) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprint(t, "unknown\tvalue\tdial\n")
	for i := range a.Unknowns {
		u := &a.Unknowns[i]
		fmt.Fprintf(t, "%s\t%s\t%s\n", u.Name, valueAndError(u), u.Dial)
	}
	t.Flush()
	if len(a.Unknowns) > 1 {
		fmt.Fprint(w, "\ncorrelation\n")
		t = tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
		for i, row := range a.Correlation {
			fmt.Fprintf(t, "%s\t", a.Unknowns[i].Name)
			for j := 0; j <= i; j++ {
				if math.IsNaN(row[j]) {
					fmt.Fprint(t, "-\t")
				} else {
					fmt.Fprintf(t, "%.2f\t", row[j]+0)
				}
			}
			fmt.Fprint(t, "\n")
		}
		t.Flush()
	}
	fmt.Fprint(w, "\n")
	for k, f := range a.Traces {
		square := 0.0
		for _, r := range f.Residual {
			square += r * r
		}
		fmt.Fprintf(w, "%s: %d points, %s, rms of the residuals %.3g\n", f.Name, len(f.Data), a.Weighting[k], math.Sqrt(square/float64(len(f.Residual))))
	}
	switch {
	case a.DegreesOfFreedom < 1:
	case a.ErrorsKnown:
		fmt.Fprintf(w, "reduced chi-square %.3f at %d degrees of freedom\n", a.ReducedChiSquare, a.DegreesOfFreedom)
	default:
		fmt.Fprintf(w, "%d degrees of freedom\n", a.DegreesOfFreedom)
	}
	return nil
}

// valueAndError writes an unknown as 12.34(5) kHz, or a limit as > 3 ms (68 %).
func valueAndError(u *fit.Unknown) string {
	if math.IsNaN(u.Error) { // at a bound; a limit where the data allow one
		if math.IsInf(u.High, 1) {
			return "> " + u.Format(twoDigits(u.Low)) + " (68 %)"
		}
		if u.High > u.Low && u.Low == 0 {
			return "< " + u.Format(twoDigits(u.High)) + " (68 %)"
		}
	}
	text, unit, _ := strings.Cut(u.Format(u.Value), " ")
	if v, err := strconv.ParseFloat(text, 64); err == nil && v != 0 && unit != "" && !math.IsInf(v, 0) {
		factor := u.Value / v
		return fit.Notation(v, u.Error/factor) + " " + unit
	}
	return strings.TrimSpace(fit.Notation(u.Value, u.Error) + " " + unit)
}

func twoDigits(v float64) float64 {
	out, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 1, 64), 64)
	return out
}

// fitJSON writes the answer as one object in SI units.
func fitJSON(w io.Writer, a *fit.Answer) error {
	type unknown struct {
		Name  string `json:"name"`
		Dial  string `json:"dial"`
		Unit  string `json:"unit"`
		Value number `json:"value"`
		Error number `json:"error"`
		Low   number `json:"low"`
		High  number `json:"high"`
	}
	out := struct {
		Unknowns    []unknown  `json:"unknowns"`
		Correlation [][]number `json:"correlation"`
		ChiSquare   number     `json:"reduced_chi_square"`
		Freedom     int        `json:"degrees_of_freedom"`
		Warnings    []string   `json:"warnings"`
	}{ChiSquare: number(a.ReducedChiSquare), Freedom: a.DegreesOfFreedom, Warnings: append([]string{}, a.Warnings...)}
	for i, u := range a.Unknowns {
		out.Unknowns = append(out.Unknowns, unknown{u.Name, u.Dial, u.Unit, number(u.Value), number(u.Error), number(u.Low), number(u.High)})
		var row []number
		for _, c := range a.Correlation[i] {
			row = append(row, number(c))
		}
		out.Correlation = append(out.Correlation, row)
	}
	return json.NewEncoder(w).Encode(out)
}

// drawFit shows data with errors, the model as a curve, and the residuals.
func drawFit(c *cli.Context, e *experiment.Experiment, a *fit.Answer) (*figure.Figure, error) {
	f := &figure.Figure{Title: e.Title()}
	for k := range a.Traces {
		t := &a.Traces[k]
		x := figure.Axis{Label: "Time since the start of the record", Unit: "s"}
		if len(t.Dials) > 0 {
			d, err := e.Dial(t.Dials[0])
			if err != nil {
				return nil, err
			}
			x = figure.Axis{Label: capital(d.Doc) + ", " + d.Path, Unit: d.Unit}
		}
		label := "measured"
		if len(a.Traces) > 1 {
			label = t.Name
		}
		cx, cy, err := t.Curve(c.Context, 600)
		if err != nil {
			return nil, err
		}
		top := figure.Panel{X: x, Y: figure.Axis{Label: "Signal", Unit: "1"}, Points: []figure.Points{{Label: label, X: t.X, Y: t.Data, Error: t.Error}}}
		if cx != nil {
			top.Lines = []figure.Line{{Label: "fitted", X: cx, Y: cy}}
		} else {
			top.Points = append(top.Points, figure.Points{Label: "fitted", X: t.X, Y: t.Model})
		}
		f.Panels = append(f.Panels, top, figure.Panel{X: x, Y: figure.Axis{Label: "Residual", Unit: "1"}, Horizontals: []float64{0}, Share: 0.5, Points: []figure.Points{{X: t.X, Y: t.Residual, Error: t.Error}}})
	}
	return f, nil
}

func capital(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}
