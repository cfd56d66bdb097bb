package ode

import (
	"context"
	"errors"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/floats"

	"rhotrace/ode/odetest"
)

var background = context.Background()

// grid returns n equal steps from 0 to end, without 0.
func grid(end float64, n int) []float64 {
	return floats.Span(make([]float64, n+1), 0, end)[1:]
}

// errorsOf solves a problem and returns the largest Euclidean distance from the
// exact answer at the times before the last, and that at the last.
func errorsOf(t testing.TB, tab *Tableau, p odetest.Problem, set Settings, times []float64) (within, last float64, stats Stats) {
	y := append([]float64(nil), p.Start...)
	want := make([]float64, len(y))
	stats, err := NewSolver(len(y), tab, set).Solve(background, p.Slope, 0, y, times, func(i int, at float64, y []float64) error {
		require.Equal(t, times[i], at)
		p.Exact(at, want)
		if i < len(times)-1 {
			within = math.Max(within, floats.Distance(y, want, 2))
		} else {
			last = floats.Distance(y, want, 2)
		}
		return nil
	})
	require.NoError(t, err, "%s, %s", tab.Name, p.Name)
	return within, last, stats
}

// The power of h with which true errors shrink, with equal steps forced by an
// accuracy that anything satisfies, on a nonlinear problem; of the dense output
// by states within the first step alone, where nothing of earlier steps hides it:
// y(u) of order q errs by h^{q+1}.
func TestConvergence(t *testing.T) {
	steps := map[*Tableau]int{DormandPrince54: 400, DormandPrince853: 60}
	for _, tab := range Tableaux {
		for _, p := range []odetest.Problem{odetest.Orbit(0.1), odetest.Cosine()} {
			t.Run(tab.Name+" "+p.Name, func(t *testing.T) {
				n := steps[tab]
				forced := func(n int) Settings {
					h := p.End / float64(n)
					return Settings{Accuracy: 1e100, FirstStep: h, LargestStep: h}
				}
				_, coarse, a := errorsOf(t, tab, p, forced(n), []float64{p.End})
				_, fine, b := errorsOf(t, tab, p, forced(2*n), []float64{p.End})
				require.Equal(t, n, a.Steps)
				require.Equal(t, 2*n, b.Steps)
				assert.InDelta(t, tab.Order, math.Log2(coarse/fine), 0.2, "errors %g, %g", coarse, fine)

				one := func(h float64) float64 {
					set := Settings{Accuracy: 1e100, FirstStep: h, LargestStep: h}
					worst, _, stats := errorsOf(t, tab, p, set, grid(h, 20))
					require.Equal(t, 1, stats.Steps)
					return worst
				}
				h := map[*Tableau]float64{DormandPrince54: 0.02, DormandPrince853: 0.2}[tab]
				coarse, fine = one(h), one(h/2)
				assert.InDelta(t, tab.Within+1, math.Log2(coarse/fine), 0.2, "within a step: errors %g, %g", coarse, fine)
			})
		}
	}
}
