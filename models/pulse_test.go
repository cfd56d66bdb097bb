package models

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/num/dual"

	"rhotrace/lindblad"
)

func pulses() map[string]*Pulse {
	n := func(v, slope float64) dual.Number { return dual.Number{Real: v, Emag: slope} }
	t := n(1.3, 0.7)
	return map[string]*Pulse{
		"square":       {Shape: Square, Lasts: t, Rise: n(0.2, 0.3), Fall: n(0.4, -0.2)},
		"overlap":      {Shape: Square, Lasts: t, Rise: n(0.8, 0.3), Fall: n(0.9, 0.1)},
		"gaussian":     {Shape: Gaussian, Lasts: t, Centre: n(0.5, 0.2), Width: n(0.25, 0.4)},
		"sech":         {Shape: Sech, Lasts: t, Centre: n(0.8, -0.1), Width: n(0.2, 0.3)},
		"blackman":     {Shape: Blackman, Lasts: t},
		"sine-squared": {Shape: SineSquared, Lasts: t},
		"sampled":      {Shape: Sampled, Lasts: t, Times: []float64{0, 0.3, 0.45, 1}, Samples: []float64{0, 1, 0.4, 0.1}},
	}
}

// plainly is the course from the formulas in the comments of Shape.
func plainly(p *Pulse, t float64) float64 {
	T := p.Lasts.Real
	sin2 := func(x float64) float64 { return math.Pow(math.Sin(math.Pi*x), 2) }
	switch p.Shape {
	case Gaussian:
		return math.Exp(-math.Pow((t-p.Centre.Real)/p.Width.Real, 2) / 2)
	case Sech:
		return 1 / math.Cosh((t-p.Centre.Real)/p.Width.Real)
	case Blackman:
		return 0.42 - 0.5*math.Cos(2*math.Pi*t/T) + 0.08*math.Cos(4*math.Pi*t/T)
	case SineSquared:
		return sin2(t / T)
	case Sampled:
		for k := 1; k < len(p.Times); k++ {
			if a, b := p.Times[k-1]*T, p.Times[k]*T; t <= b {
				return p.Samples[k-1] + (p.Samples[k]-p.Samples[k-1])*(t-a)/(b-a)
			}
		}
	}
	f := 1.0
	if t < p.Rise.Real {
		f *= sin2(t / (2 * p.Rise.Real))
	}
	if t > T-p.Fall.Real {
		f *= sin2((T - t) / (2 * p.Fall.Real))
	}
	return f
}

// moved is the pulse with every number moved by h along its slope.
func moved(p *Pulse, h float64) *Pulse {
	q := *p
	for _, n := range []*dual.Number{&q.Lasts, &q.Centre, &q.Width, &q.Rise, &q.Fall} {
		n.Real += h * n.Emag
	}
	return &q
}

func TestPulsesAndTheirSeries(t *testing.T) {
	for name, p := range pulses() {
		value, slope := p.envelope(false), p.envelope(true)
		for _, at := range []float64{0.05, 0.31, 0.52, 0.77, 0.99, 1.21} {
			assert.InDelta(t, plainly(p, at), value.At(at), 1e-14, "%s at %g", name, at)
			// The series sums to the course a little later.
			c := make([]float64, 30)
			value.(lindblad.Series).Taylor(at, c)
			sum, tau := 0.0, 0.01
			for k := len(c) - 1; k >= 0; k-- {
				sum = sum*tau + c[k]
			}
			assert.InDelta(t, plainly(p, at+tau), sum, 1e-12, "%s after %g", name, at)
			// Slopes against Richardson's differences of the plain formulas, error h⁴.
			d := func(h float64) float64 { return (plainly(moved(p, h), at) - plainly(moved(p, -h), at)) / (2 * h) }
			assert.InDelta(t, (4*d(1e-4)-d(2e-4))/3, slope.At(at), 1e-9, "%s slope at %g", name, at)
		}
	}
}

// Areas against Gauss–Legendre quadrature of the plain formulas, by pieces
// between their breaks.
func TestPulseIntegrals(t *testing.T) {
	for name, p := range pulses() {
		if name == "overlap" {
			continue
		}
		breaks := []float64{0}
		for at := 0.0; ; {
			if at = p.envelope(false).(*envelope).NextBreak(at); at >= p.Lasts.Real {
				break
			}
			breaks = append(breaks, at)
		}
		breaks = append(breaks, p.Lasts.Real)
		sum := 0.0
		for k := 1; k < len(breaks); k++ {
			sum += quad.Fixed(func(x float64) float64 { return plainly(p, x) }, breaks[k-1], breaks[k], 60, quad.Legendre{}, 0)
		}
		assert.InDelta(t, sum, p.Integral(), 1e-12, name)
	}
}

// Two drives on one pair close a loop that turns with the difference of their
// detunings; a ladder and a Λ close none.
func TestFrames(t *testing.T) {
	find := func(m Model) Frames {
		f, err := FindFrames(m)
		assert.NoError(t, err)
		return f
	}
	pair := func(a, b int) Drive { return Drive{Pairs: []Pair{{a, b}}} }
	ladder := find(Model{Levels: 3, Drives: []Drive{pair(0, 1), pair(1, 2)}})
	assert.Empty(t, ladder.Loops)
	assert.Equal(t, [][]int{{0, 0}, {1, 0}, {1, 1}}, ladder.Counts)
	lambda := find(Model{Levels: 3, Drives: []Drive{pair(0, 2), pair(1, 2)}})
	assert.Empty(t, lambda.Loops)
	assert.Equal(t, []int{1, -1}, lambda.Counts[1])
	twice := find(Model{Levels: 2, Drives: []Drive{pair(0, 1), pair(0, 1)}})
	assert.Equal(t, []Loop{{Drive: 1, Pair: 0, Shift: []int{1, 0}}}, twice.Loops)
	assert.True(t, twice.InLoop(0) && twice.InLoop(1))
	alone := find(Model{Levels: 4, Drives: []Drive{pair(2, 3)}})
	assert.Equal(t, []int{0, 1, 2, 2}, alone.Group)
	triangle := find(Model{Levels: 3, Drives: []Drive{pair(0, 1), pair(1, 2), pair(0, 2)}})
	assert.Equal(t, []int{0, 1, 1}, []int{triangle.Counts[0][0], triangle.Counts[1][0], triangle.Counts[1][0]})
	// Breadth first: level 2 is reached by the third drive, so the second closes.
	assert.Equal(t, 1, triangle.Loops[0].Drive)
	assert.Equal(t, []int{-1, 0, 1}, triangle.Loops[0].Shift)
}

// Detunings that close a loop in decimal numbers leave nothing to turn, though
// 100.1 + 200.2 is not 300.3 in binary.
func TestLoopAtRestInDecimals(t *testing.T) {
	pair := func(a, b int) Drive { return Drive{Pairs: []Pair{{a, b}}} }
	l, err := NewLayout(Model{Levels: 3, Drives: []Drive{pair(0, 1), pair(1, 2), pair(0, 2)}})
	assert.NoError(t, err)
	one := []dual.Number{{Real: 1}}
	set := Settings{Drives: []DriveSettings{{On: true, Elements: one, Detuning: dual.Number{Real: 100.1}}, {On: true, Elements: one, Detuning: dual.Number{Real: 200.2}},
		{On: true, Elements: one, Detuning: dual.Number{Real: 300.3, Emag: 1}}}}
	st := l.NewStretch(1)
	l.Fill(&st, &set, -1)
	l.Fill(&st, &set, 0)
	assert.Zero(t, st.Rotors[0])
	assert.NotZero(t, st.Slopes[0].Rotors[0])
	set.Drives[2].Detuning.Real += 1e-9
	l.Fill(&st, &set, -1)
	assert.NotZero(t, st.Rotors[0])
}
