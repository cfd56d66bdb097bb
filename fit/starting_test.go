package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func noisy(x []float64, noise float64, f func(x float64) float64) []float64 {
	rng := rand.New(rand.NewPCG(17, uint64(len(x))))
	var y []float64
	for _, x := range x {
		y = append(y, f(x)+noise*rng.NormFloat64())
	}
	return y
}

func evenly(from, to float64, points int) []float64 {
	var x []float64
	for i := range points {
		x = append(x, from+(to-from)*float64(i)/float64(points-1))
	}
	return x
}

// Starting values come within a few standard errors of what made the data:
// the tolerances are some four times the errors that least squares gives here.
func TestOscillations(t *testing.T) {
	for _, c := range []struct{ frequency, decay, phase, offset float64 }{
		{1.7, 4, 0.4, 0.5}, {1.7, math.Inf(1), -2, 0}, {0.21, 6, 1, -3}, {4.6, 0.7, 0, 0.5}, {0.9, 0.5, 0, 0.5},
	} {
		x := evenly(3, 13, 120)
		y := noisy(x, 0.02, func(x float64) float64 {
			return c.offset + 0.5*math.Exp(-(x-3)/c.decay)*math.Cos(2*math.Pi*c.frequency*x+c.phase)
		})
		found := Oscillations(x, y, nil, 3)
		require.NotEmpty(t, found)
		o := found[0]
		spread := min(c.decay, 10)
		assert.InDelta(t, c.frequency, o.Frequency, 0.05/spread, "%v", c)
		assert.InDelta(t, 0.5, o.Amplitude, 0.08, "%v", c)
		assert.InDelta(t, c.offset, o.Offset, 0.02, "%v", c)
		assert.InDelta(t, 0, math.Remainder(o.Phase-c.phase+2*math.Pi*(o.Frequency-c.frequency)*3, 2*math.Pi), 0.15, "%v", c)
		if math.IsInf(c.decay, 1) {
			assert.Greater(t, o.DecayTime, 100.0)
		} else {
			assert.InEpsilon(t, c.decay, o.DecayTime, 0.25, "%v", c)
		}
		assert.Less(t, o.ChiSquare, 120*0.02*0.02*1.5)
	}
	assert.Empty(t, Oscillations([]float64{1, 2, 3}, []float64{1, 2, 3}, nil, 2))
	assert.Empty(t, Oscillations(evenly(0, 1, 9), make([]float64, 9), nil, 2))
}

func TestRelax(t *testing.T) {
	x := evenly(1, 21, 50)
	for _, time := range []float64{0.6, 5, 60} {
		y := noisy(x, 0.001, func(x float64) float64 { return 2 - 3*math.Exp(-(x-1)/time) })
		r, ok := Relax(x, y, nil)
		require.True(t, ok)
		assert.InEpsilon(t, time, r.Time, 0.03)
		assert.InEpsilon(t, 2, r.Offset, 0.05)
		assert.InEpsilon(t, -3, r.Amplitude, 0.05)
	}
	_, ok := Relax([]float64{1, 1, 1}, []float64{1, 2, 3}, nil)
	assert.False(t, ok)
	_, ok = Relax([]float64{1, 2}, []float64{1, 2}, nil)
	assert.False(t, ok)
	r, ok := Relax(evenly(0, 1, 5), []float64{2, 2, 2, 2, 2}, nil)
	assert.True(t, ok)
	assert.InDelta(t, 2, r.Offset+r.Amplitude, 1e-12)
}

func TestLines(t *testing.T) {
	x := evenly(-50, 50, 101)
	for _, c := range []struct{ centre, width, height float64 }{
		{12.3, 8, 0.4}, {-31, 3, -0.3}, {0, 40, -1}, {48, 10, 1},
	} {
		y := noisy(x, 0.01, func(x float64) float64 {
			u := 2 * (x - c.centre) / c.width
			return 0.6 + c.height/(1+u*u)
		})
		found := Lines(x, y, nil, 2)
		require.NotEmpty(t, found)
		l := found[0]
		assert.InDelta(t, c.centre, l.Centre, 0.1*c.width, "%v", c)
		assert.InEpsilon(t, c.width, l.Width, 0.2, "%v", c)
		assert.InEpsilon(t, c.height, l.Height, 0.15, "%v", c)
		assert.InDelta(t, 0.6, l.Offset, 0.1, "%v", c)
	}
	// Two dips: both are proposed.
	y := noisy(x, 0.005, func(x float64) float64 {
		u, v := (x+20)/3, (x-15)/3
		return 1 - 0.5/(1+u*u) - 0.4/(1+v*v)
	})
	found := Lines(x, y, nil, 2)
	require.Len(t, found, 2)
	assert.InDelta(t, -20, found[0].Centre, 2)
	assert.InDelta(t, 15, found[1].Centre, 2)
	assert.Empty(t, Lines([]float64{1, 2, 3}, []float64{1, 2, 1}, nil, 1))
	assert.Empty(t, Lines(x, make([]float64, len(x)), nil, 1))
}
