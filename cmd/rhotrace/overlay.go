package main

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"rhotrace/cmd/rhotrace/internal/outfile"
	"rhotrace/experiment"
	"rhotrace/fit"
	"rhotrace/io/figure"
	"rhotrace/io/table"
)

// measured reads the traces of --trace. A file that a block of the experiment
// names is read as that block says.
func measured(e *experiment.Experiment, files []string) (traces []*experiment.Trace, err error) {
	if len(files) == 0 {
		return nil, nil
	}
	own, err := e.Traces()
	if err != nil {
		return nil, unread(err)
	}
	for _, file := range files {
		if file == "-" {
			return nil, mistaken("--trace -: a measured trace is not read from standard input; name its file")
		}
		i := slices.IndexFunc(own, func(t *experiment.Trace) bool { return outfile.Same(t.File, file) })
		if i >= 0 {
			traces = append(traces, own[i])
			continue
		}
		given, err := e.Traces(file)
		if err != nil {
			return nil, unread(err)
		}
		traces = append(traces, given[len(given)-1])
	}
	return traces, nil
}

// note says how measured traces were read.
func (s *session) note(traces []*experiment.Trace) {
	for _, t := range traces {
		if len(t.Remarks) > 0 {
			fmt.Fprintf(s.errOut, "rhotrace: note: %s: %s\n", t.File, oneLine(strings.Join(t.Remarks, "; ")))
		}
	}
}

// overlaid makes the figure of a prediction with measured traces over it. Where
// a trace was taken at other values of some dials, every trace gets the curve
// predicted at its own.
func overlaid(ctx context.Context, e *experiment.Experiment, t *table.Table, traces []*experiment.Trace) (*figure.Figure, error) {
	choice, err := commonChoice(traces)
	if err != nil {
		return nil, err
	}
	f, err := curves(t, choice)
	if err != nil {
		return nil, err
	}
	panel := &f.Panels[0]
	if len(panel.Lines) == 1 {
		panel.Lines[0].Label = "predicted"
	}
	if slices.ContainsFunc(traces, func(t *experiment.Trace) bool { return len(t.At) > 0 }) {
		panel.Lines = nil
		for _, trace := range traces {
			lines, err := linesAt(ctx, e, trace, choice)
			if err != nil {
				return nil, err
			}
			panel.Lines = append(panel.Lines, lines...)
		}
	}
	for _, trace := range traces {
		points, err := pointsOf(e, trace, choice.X)
		if err != nil {
			return nil, err
		}
		panel.Points = append(panel.Points, points)
	}
	return f, nil
}

// commonChoice says what is drawn so that all traces can be laid over it.
func commonChoice(traces []*experiment.Trace) (choice figure.Choice, err error) {
	for i, trace := range traces {
		own, err := choiceOf(trace)
		if err != nil {
			return choice, err
		}
		if i == 0 {
			choice = own
		} else if own.X != choice.X || own.Y[0] != choice.Y[0] {
			return choice, mistaken("--trace: %s shows %s over %s, and %s shows %s over %s; draw them in figures of their own",
				traces[0].File, choice.Y[0], choice.X, trace.File, own.Y[0], own.X)
		}
	}
	return choice, nil
}

// choiceOf finds the one scanned dial, or the time, along which a trace lies.
func choiceOf(trace *experiment.Trace) (figure.Choice, error) {
	choice := figure.Choice{Y: []string{trace.Shows}, At: map[string]float64{}}
	if len(trace.Dials) == 0 {
		choice.X = "time"
		return choice, nil
	}
	for k, dial := range trace.Dials {
		first := trace.Points[0][k]
		varies := slices.ContainsFunc(trace.Points, func(p []float64) bool { return p[k] != first })
		switch {
		case varies && choice.X != "":
			return choice, mistaken("--trace %s: the rows differ in %s and in %s, and a trace is laid over curves of one; give the rows at one value of either", trace.File, choice.X, dial)
		case varies || len(trace.Dials) == 1:
			choice.X = dial
		default:
			choice.At[dial] = first
		}
	}
	if choice.X == "" {
		return choice, mistaken("--trace %s: no dial differs between the rows, so there is nothing to draw them over; give rows at several values", trace.File)
	}
	return choice, nil
}

// curves are those that a trace can be laid over.
func curves(t *table.Table, choice figure.Choice) (*figure.Figure, error) {
	if t.Column(choice.X) == nil {
		return nil, mistaken("the trace lies along %s, which the file does not scan (or, for time, record in samples); make it do so", choice.X)
	}
	f, err := figure.FromTable(t, choice)
	if err != nil {
		return nil, mistaken("the trace lies along %s alone, and here more is scanned; take the other scans out", choice.X)
	}
	return f, nil
}

// linesAt are the curves predicted for a trace, with the dials where they stood.
func linesAt(ctx context.Context, e *experiment.Experiment, trace *experiment.Trace, choice figure.Choice) ([]figure.Line, error) {
	there, err := e.With(trace.At...)
	if err != nil {
		return nil, mistake{err}
	}
	t, err := experiment.Run(ctx, there)
	if err != nil {
		return nil, err
	}
	f, err := curves(t, choice)
	if err != nil {
		return nil, err
	}
	lines := f.Panels[0].Lines
	for i := range lines {
		lines[i].Label = "predicted for " + trace.Name
	}
	return lines, nil
}

// pointsOf turns a trace into points on the scale of the prediction: counts
// become fractions of the shots, and scale and offset of the trace are undone.
func pointsOf(e *experiment.Experiment, trace *experiment.Trace, x string) (figure.Points, error) {
	p := figure.Points{Label: trace.Name, X: trace.Times}
	if k := slices.Index(trace.Dials, x); k >= 0 {
		p.X = make([]float64, len(trace.Points))
		for i := range p.X {
			p.X[i] = trace.Points[i][k]
		}
	}
	scale, offset := 1.0, 0.0
	if trace.Scale != "" {
		var err error
		if scale, err = e.Value(trace.Scale); err != nil {
			return p, err
		}
		if offset, err = e.Value(trace.Offset); err != nil {
			return p, err
		}
		if scale == 0 {
			return p, mistaken("%s is 0, so the measured trace says nothing of the prediction; give it another value", trace.Scale)
		}
	}
	for i, y := range trace.Y {
		y, sd := measuredValue(trace, i, y)
		p.Y = append(p.Y, (y-offset)/scale)
		p.Error = append(p.Error, sd/math.Abs(scale))
	}
	return p, nil
}

// measuredValue is the value of row i and its standard error: the one given,
// else that of counting shots, else NaN, which draws no bar.
func measuredValue(trace *experiment.Trace, i int, y float64) (value, sd float64) {
	sd, per := math.NaN(), 1.0
	if trace.Shots != nil && trace.Is == "counts" {
		per = trace.Shots[i]
	}
	value = y / per
	switch {
	case trace.Error != nil:
		sd = trace.Error[i] / per
	case trace.Shots != nil && trace.Is != "value" && value >= 0 && value <= 1:
		sd = fit.CountError(value*trace.Shots[i], trace.Shots[i])
	}
	return value, sd
}
