package main

import (
	"context"

	"rhotrace/experiment"
	"rhotrace/io/figure"
	"rhotrace/io/table"
)

// draw makes the figure of a prediction, with measured traces over it.
func draw(ctx context.Context, e *experiment.Experiment, t *table.Table, traces []*experiment.Trace) (f *figure.Figure, err error) {
	if len(traces) > 0 {
		f, err = overlaid(ctx, e, t, traces)
	} else {
		f, err = plain(e, t)
	}
	if err == nil {
		f.Title = e.Title()
	}
	return f, err
}

func plain(e *experiment.Experiment, t *table.Table) (*figure.Figure, error) {
	asked, _ := split(e, t)
	if len(asked) == 0 {
		return nil, mistaken("there is nothing to draw against: the file scans no dial and records no samples; add a scan, or samples = 201 in [record]")
	}
	f, err := figure.FromTable(t, figure.Choice{})
	if err != nil && len(asked) > 2 {
		return nil, mistaken("a figure shows one or two scans, and here are %s; take some out, or save the table with -o", list(names(asked)))
	}
	return f, err
}

func names(columns []table.Column) (names []string) {
	for _, c := range columns {
		names = append(names, c.Name)
	}
	return names
}
