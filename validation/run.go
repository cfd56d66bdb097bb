package validation

import (
	"context"
	"fmt"
	"strings"

	"rhotrace/experiment"
	"rhotrace/io/table"
)

// run reads an experiment and runs it.
func run(ctx context.Context, text string, turns ...experiment.Turn) (*table.Table, error) {
	e, err := experiment.Read("check", []byte("format = 1\n"+text))
	if err != nil {
		return nil, err
	}
	if e, err = e.With(turns...); err != nil {
		return nil, err
	}
	return experiment.Run(ctx, e)
}

// last runs an experiment and takes the last row of a column.
func last(text, column string) func(context.Context) (float64, error) {
	return func(ctx context.Context) (float64, error) {
		t, err := run(ctx, text)
		if err != nil {
			return 0, err
		}
		return lastOf(t, column)
	}
}

func lastOf(t *table.Table, column string) (float64, error) {
	c := t.Column(column)
	if c == nil {
		return 0, fmt.Errorf("there is no column %q", column)
	}
	return c.Values[len(c.Values)-1], nil
}

// ratio divides what two computations find.
func ratio(over, under func(context.Context) (float64, error)) func(context.Context) (float64, error) {
	return func(ctx context.Context) (float64, error) {
		a, err := over(ctx)
		if err != nil {
			return 0, err
		}
		b, err := under(ctx)
		return a / b, err
	}
}

func times(f float64, found func(context.Context) (float64, error)) func(context.Context) (float64, error) {
	return func(ctx context.Context) (float64, error) {
		v, err := found(ctx)
		return f * v, err
	}
}

func fill(text string, pairs ...string) string { return strings.NewReplacer(pairs...).Replace(text) }

// twoLevels is a driven atom with decay and pure dephasing; angular numbers per
// µs. tail goes behind the steps.
func twoLevels(omega, delta, gamma, dephasing float64, tail string) string {
	return fill(`[level.g]
[level.e]
[drive.d]
between = ["g", "e"]
rabi = "OMEGA"
detuning = "DELTA"
[decay.x]
from = "e"
to = "g"
rate = "GAMMA"
[dephasing.y]
weights = { e = 1 }
rate = "PHI"
`, "OMEGA", hz(omega), "DELTA", hz(delta), "GAMMA", perUs(gamma), "PHI", perUs(dephasing)) + tail
}

func pulse(t float64) string {
	return "[step.p]\non = [\"d\"]\nlasts = \"" + us(t) + "\"\n[sequence]\norder = \"p\"\n"
}

const endless = "[step.p]\non = [\"d\"]\n[sequence]\norder = \"p\"\n[record]\nwhen = \"steady\"\ncoherences = \"all\"\n"

func sum(a, b func(context.Context) (float64, error)) func(context.Context) (float64, error) {
	return func(ctx context.Context) (float64, error) {
		x, err := a(ctx)
		if err != nil {
			return 0, err
		}
		y, err := b(ctx)
		return x + y, err
	}
}

func square(a func(context.Context) (float64, error)) func(context.Context) (float64, error) {
	return func(ctx context.Context) (float64, error) {
		x, err := a(ctx)
		return x * x, err
	}
}
