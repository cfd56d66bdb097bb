package ode

import (
	"context"
	"errors"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Right-hand sides, settings and callers that misbehave, with every method. The
// idea of such a table is common practice. Every case starts at 0 with y = 1;
// exact is the answer up to the failure, so that y can be held against it.
func TestFaults(t *testing.T) {
	broken := errors.New("broken")
	decay := func(_ float64, y, d []float64) error { d[0] = -y[0]; return nil }
	e := func(t float64) float64 { return math.Exp(-t) }
	stopped, stop := context.WithCancelCause(background)
	stop(broken)
	for _, c := range []struct {
		name     string
		set      Settings
		f        Func
		times    []float64
		emit     func(int, float64, []float64) error
		ctx      context.Context
		want     error
		low, top float64 // where the failure may be
		exact    func(t float64) float64
	}{
		{name: "error at the start", f: func(float64, []float64, []float64) error { return broken },
			want: broken, exact: e},
		{name: "error in the probe of the first step", f: func(t float64, y, d []float64) error {
			if t > 0 {
				return broken
			}
			return decay(t, y, d)
		}, want: broken, exact: e},
		{name: "error half-way", f: func(t float64, y, d []float64) error {
			if t > 0.5 {
				return broken
			}
			return decay(t, y, d)
		}, want: broken, low: 0.01, top: 0.5, exact: e},
		{name: "NaN at the start", f: func(_ float64, _, d []float64) error { d[0] = math.NaN(); return nil },
			want: ErrNotFinite, exact: e},
		{name: "NaN half-way", f: func(t float64, y, d []float64) error {
			if t > 0.5 {
				d[0] = math.NaN()
				return nil
			}
			return decay(t, y, d)
		}, want: ErrNotFinite, low: 0.5 - 1e-9, top: 0.5, exact: e},
		{name: "infinite half-way", f: func(t float64, y, d []float64) error {
			if t > 0.5 {
				d[0] = math.Inf(1)
				return nil
			}
			return decay(t, y, d)
		}, want: ErrNotFinite, low: 0.5 - 1e-9, top: 0.5, exact: e},
		{name: "NaN between outputs", f: func(t float64, y, d []float64) error {
			if t > 0.5 {
				d[0] = math.NaN()
				return nil
			}
			return decay(t, y, d)
		}, times: grid(1, 1000), want: ErrNotFinite, low: 0.5 - 1e-9, top: 0.5, exact: e},
		{name: "blow-up", f: func(_ float64, y, d []float64) error { d[0] = y[0] * y[0]; return nil },
			times: []float64{2}, want: ErrStepSize, low: 0.9, top: 1 + 1e-6, exact: func(t float64) float64 { return 1 / (1 - t) }},
		{name: "noise", f: func() Func {
			sign := 1e6
			return func(_ float64, _, d []float64) error { sign = -sign * 1.01; d[0] = sign; return nil }
		}(), want: ErrStepSize, top: 1e-9, exact: func(float64) float64 { return 1 }},
		{name: "step", f: func(t float64, y, d []float64) error {
			d[0] = 0
			if t > 1/math.Pi {
				d[0] = 1
			}
			return nil
		}, set: Settings{LargestStep: 0.2}, low: 1, top: 1, exact: func(t float64) float64 { return 1 + max(0, t-1/math.Pi) }},
		{name: "out of the domain in trials only", f: func(_ float64, y, d []float64) error { d[0] = -math.Sqrt(y[0]); return nil },
			set: Settings{FirstStep: 100}, times: []float64{1.9}, low: 1.9, top: 1.9, exact: func(t float64) float64 { return (1 - t/2) * (1 - t/2) }},
		{name: "step limit", f: decay, set: Settings{MostSteps: 3, LargestStep: 0.1}, want: ErrSteps, low: 0.01, top: 0.9, exact: e},
		{name: "cancelled before", f: decay, ctx: stopped, want: broken, exact: e},
		{name: "emit fails within a step", f: decay, times: grid(1, 1000), emit: func(i int, _ float64, _ []float64) error {
			if i == 555 {
				return broken
			}
			return nil
		}, want: broken, low: 0.556, top: 0.556, exact: e},
		{name: "emit fails at the start", f: decay, times: []float64{0, 1}, emit: func(int, float64, []float64) error { return broken },
			want: broken, exact: e},
		{name: "emit fails at the end", f: decay, emit: func(int, float64, []float64) error { return broken },
			want: broken, low: 1, top: 1, exact: e},
		{name: "everything refused", f: decay, set: Settings{Accept: func(t float64, _ []float64) bool { return t < 0.5 }},
			want: ErrVeto, low: 0.5 - 1e-9, top: 0.5, exact: e},
		{name: "accuracy below rounding", f: decay, set: Settings{Accuracy: 1e-25, PerTime: true},
			want: ErrStepSize, low: 0, top: 1, exact: e},
		{name: "negative accuracy", f: decay, set: Settings{Accuracy: -1}, want: ErrSettings, exact: e},
		{name: "accuracy NaN", f: decay, set: Settings{Accuracy: math.NaN()}, want: ErrSettings, exact: e},
		{name: "first step infinite", f: decay, set: Settings{FirstStep: math.Inf(1)}, want: ErrSettings, exact: e},
		{name: "largest step negative", f: decay, set: Settings{LargestStep: -1}, want: ErrSettings, exact: e},
		{name: "largest step NaN", f: decay, set: Settings{LargestStep: math.NaN()}, want: ErrSettings, exact: e},
		{name: "most steps negative", f: decay, set: Settings{MostSteps: -1}, want: ErrSettings, exact: e},
		{name: "times turn", f: decay, times: []float64{1, 0.5, 2}, want: ErrTimes, exact: e},
		{name: "times turn and return", f: decay, times: []float64{1, 0}, want: ErrTimes, exact: e},
		{name: "time NaN", f: decay, times: []float64{1, math.NaN()}, want: ErrTimes, exact: e},
		{name: "time infinite", f: decay, times: []float64{math.Inf(1)}, want: ErrTimes, exact: e},
	} {
		for _, tab := range Tableaux {
			for _, way := range []float64{1, -1} {
				if way < 0 && (c.name == "noise" || c.set.Accept != nil) {
					continue
				}
				t.Run(c.name+" "+tab.Name+map[float64]string{1: "", -1: " backward"}[way], func(t *testing.T) {
					times, ctx := c.times, c.ctx
					if times == nil {
						times = []float64{1}
					}
					if ctx == nil {
						ctx = background
					}
					// y(−t) solves the equation with slope −f(−t, y).
					f := func(t float64, y, d []float64) error {
						err := c.f(way*t, y, d)
						d[0] *= way
						return err
					}
					turned := make([]float64, len(times))
					for i := range times {
						turned[i] = way * times[i]
					}
					y := []float64{1}
					_, err := NewSolver(1, tab, c.set).Solve(ctx, f, 0, y, turned, c.emit)
					at := times[len(times)-1]
					if c.want == nil {
						require.NoError(t, err)
					} else {
						var failure *Error
						require.ErrorIs(t, err, c.want)
						require.ErrorAs(t, err, &failure)
						assert.Contains(t, err.Error(), "ode: at t = ")
						assert.GreaterOrEqual(t, failure.Step, 0.0)
						at = way * failure.Time
					}
					assert.GreaterOrEqual(t, at, c.low)
					assert.LessOrEqual(t, at, c.top)
					want := c.exact(at)
					if c.name == "blow-up" { // near it 1/(1−t) enlarges errors by (1−t)^{-2}
						assert.Greater(t, y[0], 10.0)
						return
					}
					if c.name == "noise" {
						assert.False(t, math.IsNaN(y[0]))
						return
					}
					assert.InDelta(t, want, y[0], 1e-6)
				})
			}
		}
	}
}

// A context that is cancelled on the way, and its cause.
func TestCancelled(t *testing.T) {
	for _, tab := range Tableaux {
		ctx, cancel := context.WithCancel(background)
		y := []float64{1}
		stats, err := NewSolver(1, tab, Settings{LargestStep: 0.01}).Solve(ctx, func(t float64, y, d []float64) error {
			if t > 0.5 {
				cancel()
			}
			d[0] = -y[0]
			return nil
		}, 0, y, []float64{1}, nil)
		require.ErrorIs(t, err, context.Canceled)
		var failure *Error
		require.ErrorAs(t, err, &failure)
		assert.InDelta(t, 0.5, failure.Time, 0.02)
		assert.InDelta(t, math.Exp(-failure.Time), y[0], 1e-7)
		assert.Greater(t, stats.Steps, 40)
	}
}

// A refused step comes again at half the size, is counted, and leaves no trace.
func TestVeto(t *testing.T) {
	for _, tab := range Tableaux {
		refused := 0
		var offered []float64
		set := Settings{FirstStep: 0.5, LargestStep: 0.5, Accuracy: 1e-3, Accept: func(t float64, _ []float64) bool {
			offered = append(offered, t)
			if refused < 2 {
				refused++
				return false
			}
			return true
		}}
		y := []float64{1}
		stats, err := NewSolver(1, tab, set).Solve(background, func(_ float64, y, d []float64) error { d[0] = -y[0]; return nil }, 0, y, []float64{4}, nil)
		require.NoError(t, err)
		assert.Equal(t, 2, stats.Vetoed)
		assert.Zero(t, stats.Rejected)
		assert.Equal(t, []float64{0.5, 0.25, 0.125}, offered[:3])
		assert.InDelta(t, math.Exp(-4), y[0], 1e-3)
		assert.Equal(t, 0.125, stats.First)
	}
}

func TestWrongLengthPanics(t *testing.T) {
	s := NewSolver(2, DormandPrince54, Settings{})
	assert.PanicsWithValue(t, "ode: Solve needs a y of the length given to NewSolver", func() {
		_, _ = s.Solve(background, nil, 0, []float64{1}, []float64{1}, nil)
	})
	assert.Panics(t, func() { NewSolver(-1, DormandPrince54, Settings{}) })
}

// No numbers at all: every output is handed on, and nothing goes wrong.
func TestNothingToSolve(t *testing.T) {
	for _, tab := range Tableaux {
		var seen []float64
		stats, err := NewSolver(0, tab, Settings{PerTime: true}).Solve(background, func(float64, []float64, []float64) error { return nil },
			0, nil, []float64{0, 1, 2}, func(_ int, at float64, y []float64) error {
				assert.Empty(t, y)
				seen = append(seen, at)
				return nil
			})
		require.NoError(t, err)
		assert.Equal(t, []float64{0, 1, 2}, seen)
		assert.Zero(t, stats.Rejected)
	}
}
