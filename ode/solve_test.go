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
// accuracy that anything satisfies; of the dense output by states within one
// step, where nothing of earlier steps hides it: y(u) of order q errs by h^{q+1}.
// Numbers of steps lie where the leading term rules, above rounding.
func TestConvergence(t *testing.T) {
	for _, c := range []struct {
		tab   *Tableau
		p     odetest.Problem
		steps int
		h     float64 // of the single step
	}{
		{DormandPrince54, odetest.Turning(40), 160, 0.05},
		{DormandPrince54, odetest.Logistic(), 160, 0.05},
		{DormandPrince54, odetest.Cosine(), 320, 0.02},
		{DormandPrince54, odetest.Orbit(0.1), 1280, 0.02},
		{DormandPrince853, odetest.Turning(40), 80, 0.2},
		{DormandPrince853, odetest.Root(), 80, 0},
		{DormandPrince853, odetest.Cosine(), 0, 0.2},
		{DormandPrince853, odetest.Orbit(0.1), 160, 0.2},
	} {
		t.Run(c.tab.Name+" "+c.p.Name, func(t *testing.T) {
			forced := func(h float64) Settings {
				return Settings{Accuracy: 1e100, FirstStep: h, LargestStep: h}
			}
			if c.steps > 0 {
				h := c.p.End / float64(c.steps)
				_, coarse, a := errorsOf(t, c.tab, c.p, forced(h), []float64{c.p.End})
				_, fine, b := errorsOf(t, c.tab, c.p, forced(h/2), []float64{c.p.End})
				require.Equal(t, c.steps, a.Steps)
				require.Equal(t, 2*c.steps, b.Steps)
				assert.InDelta(t, c.tab.Order, math.Log2(coarse/fine), 0.2, "errors %g, %g", coarse, fine)
			}
			if c.h == 0 {
				return
			}
			within := func(h float64) float64 {
				worst, _, stats := errorsOf(t, c.tab, c.p, forced(h), grid(h, 20))
				require.Equal(t, 1, stats.Steps)
				return worst
			}
			coarse, fine := within(c.h), within(c.h/2)
			assert.InDelta(t, c.tab.Within+1, math.Log2(coarse/fine), 0.2, "within a step: errors %g, %g", coarse, fine)
		})
	}
}

// The true error, at the end and at outputs within steps, against the accuracy
// asked for. Errors of all steps add up where solutions do not move apart: to
// Accuracy with PerTime, to Accuracy times the number of steps without. The
// others enlarge errors made on the way: A3 by up to e², its y swings between
// 1/e and e; A4 by up to 5; orbits drift. The factor 10 covers them at these
// accuracies (6.7 is the largest seen, D5 with the pair 5(4)).
func TestTrueError(t *testing.T) {
	for _, tab := range Tableaux {
		for _, p := range odetest.Problems() {
			for _, accuracy := range []float64{1e-4, 1e-6, 1e-8, 1e-10} {
				times := grid(p.End, 97)
				within, last, _ := errorsOf(t, tab, p, Settings{Accuracy: accuracy, PerTime: true}, times)
				enlarged := 10.0
				if p.Contracts {
					enlarged = 1
				}
				assert.LessOrEqual(t, max(within, last), enlarged*accuracy, "%s, %s, accuracy %g", tab.Name, p.Name, accuracy)
				if p.Contracts {
					within, last, stats := errorsOf(t, tab, p, Settings{Accuracy: accuracy}, times)
					assert.LessOrEqual(t, max(within, last), float64(stats.Steps)*accuracy, "%s, %s, accuracy %g, per step", tab.Name, p.Name, accuracy)
				}
			}
		}
	}
}

// Nine orders of magnitude of time and of y change nothing: the same steps, to
// rounding. Powers of two are exact.
func TestUnits(t *testing.T) {
	p := odetest.Orbit(0.5)
	const time, size = 1.0 / (1 << 30), 1 << 30
	for _, tab := range Tableaux {
		y := append([]float64(nil), p.Start...)
		s := NewSolver(4, tab, Settings{Accuracy: 1e-8})
		want, err := s.Solve(background, p.Slope, 0, y, []float64{p.End}, nil)
		require.NoError(t, err)
		z, x := make([]float64, 4), make([]float64, 4)
		floats.ScaleTo(z, size, p.Start)
		s = NewSolver(4, tab, Settings{Accuracy: 1e-8 * size})
		got, err := s.Solve(background, func(t float64, z, d []float64) error {
			floats.ScaleTo(x, 1.0/size, z)
			err := p.Slope(t/time, x, d)
			floats.Scale(size/time, d)
			return err
		}, 0, z, []float64{p.End * time}, nil)
		require.NoError(t, err)
		assert.Equal(t, want.Calls, got.Calls)
		for i := range y {
			assert.InDelta(t, y[i], z[i]/size, 1e-12)
		}
	}
}

func TestBackward(t *testing.T) {
	for _, tab := range Tableaux {
		for _, p := range []odetest.Problem{odetest.Cosine(), odetest.Orbit(0.5)} {
			times := grid(p.End, 50)
			y := make([]float64, len(p.Start))
			p.Exact(p.End, y)
			back := []float64{p.End}
			for i := len(times) - 2; i >= 0; i-- {
				back = append(back, times[i])
			}
			back = append(back, 0)
			want := make([]float64, len(y))
			calls := 0
			stats, err := NewSolver(len(y), tab, Settings{Accuracy: 1e-9, PerTime: true}).Solve(background, func(t float64, y, d []float64) error {
				if t < 0 || t > p.End {
					return errors.New("asked beyond the ends")
				}
				return p.Slope(t, y, d)
			}, p.End, y, back, func(i int, at float64, y []float64) error {
				require.Equal(t, calls, i)
				calls++
				require.Equal(t, back[i], at)
				p.Exact(at, want)
				assert.Less(t, floats.Distance(y, want, 2), 1e-8, "%s, %s at %g", tab.Name, p.Name, at)
				return nil
			})
			require.NoError(t, err)
			assert.Equal(t, len(back), calls)
			assert.Less(t, floats.Distance(y, p.Start, 2), 1e-8)
			assert.Greater(t, stats.Smallest, 0.0)
			assert.LessOrEqual(t, stats.Smallest, min(stats.First, stats.Last))
		}
	}
}

// Times at the start, repeated, at the ends of steps, one rounding apart.
func TestTimes(t *testing.T) {
	p := odetest.Decay()
	for _, tab := range Tableaux {
		times := []float64{0, 0, 0.1, 0.1, 0.25, math.Nextafter(0.25, 1), 0.5, 0.75, 1, 1}
		var seen []float64
		y := []float64{1}
		h := Settings{Accuracy: 1, FirstStep: 0.25, LargestStep: 0.25}
		stats, err := NewSolver(1, tab, h).Solve(background, p.Slope, 0, y, times, func(i int, at float64, y []float64) error {
			require.Equal(t, len(seen), i)
			seen = append(seen, at)
			assert.InDelta(t, math.Exp(-at), y[0], 1e-5)
			return nil
		})
		require.NoError(t, err)
		assert.Equal(t, times, seen)
		assert.Equal(t, 4, stats.Steps)

		stats, err = NewSolver(1, tab, h).Solve(background, p.Slope, 3, y, nil, nil)
		require.NoError(t, err)
		assert.Zero(t, stats)

		// A span of one rounding is one step.
		next := math.Nextafter(3, 4)
		stats, err = NewSolver(1, tab, Settings{}).Solve(background, p.Slope, 3, y, []float64{next}, nil)
		require.NoError(t, err)
		assert.Equal(t, 1, stats.Steps)
	}
}

// Long steps must not reach over a pulse far away; LargestStep sees to it.
func TestLargestStep(t *testing.T) {
	pulse := func(t float64, _, d []float64) error {
		d[0] = math.Exp(-(t-500)*(t-500)/2) / math.Sqrt(2*math.Pi)
		return nil
	}
	for _, tab := range Tableaux {
		y := []float64{0}
		stats, err := NewSolver(1, tab, Settings{LargestStep: 2}).Solve(background, pulse, 0, y, []float64{1000}, nil)
		require.NoError(t, err)
		assert.InDelta(t, 1, y[0], 1e-6)
		assert.LessOrEqual(t, stats.Last, 2.0)
	}
}

func TestNothingIsAllocated(t *testing.T) {
	p := odetest.Turning(40)
	for _, tab := range Tableaux {
		for _, times := range [][]float64{{20}, grid(20, 100)} {
			y := make([]float64, len(p.Start))
			s := NewSolver(len(y), tab, Settings{Accept: func(float64, []float64) bool { return true }})
			emit := func(int, float64, []float64) error { return nil }
			assert.Zero(t, testing.AllocsPerRun(3, func() {
				copy(y, p.Start)
				if _, err := s.Solve(background, p.Slope, 0, y, times, emit); err != nil {
					panic(err)
				}
			}), tab.Name)
		}
	}
}

// A solver that is used again gives the same bits as a new one, and as one with
// other outputs on the way.
func TestSameBits(t *testing.T) {
	p := odetest.Orbit(0.5)
	for _, tab := range Tableaux {
		s := NewSolver(4, tab, Settings{})
		end := func(s *Solver, times []float64) []float64 {
			y := append([]float64(nil), p.Start...)
			_, err := s.Solve(background, p.Slope, 0, y, times, func(int, float64, []float64) error { return nil })
			require.NoError(t, err)
			return y
		}
		want := end(s, []float64{20})
		assert.Equal(t, want, end(s, grid(20, 33)))
		assert.Equal(t, want, end(NewSolver(4, tab, Settings{}), []float64{20}))
	}
}

func Benchmark(b *testing.B) {
	for _, tab := range Tableaux {
		for _, p := range odetest.Problems() {
			for _, accuracy := range []float64{1e-6, 1e-10} {
				b.Run(fmt.Sprintf("%s/%s/%g", tab.Name, p.Name, accuracy), func(b *testing.B) {
					y := make([]float64, len(p.Start))
					s := NewSolver(len(y), tab, Settings{Accuracy: accuracy})
					times := []float64{p.End}
					b.ReportAllocs()
					for b.Loop() {
						copy(y, p.Start)
						stats, err := s.Solve(background, p.Slope, 0, y, times, nil)
						if err != nil {
							b.Fatal(err)
						}
						b.ReportMetric(float64(stats.Calls), "calls/op")
					}
				})
			}
		}
	}
}
