package models

import (
	"math"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/lindblad"
)

// Shape is the course of a drive's Rabi frequency during a stretch.
type Shape int

const (
	Square      Shape = iota // one, with sin² ramps of length Rise and Fall inside
	Gaussian                 // exp(−(t − Centre)²/2 Width²), cut at the ends
	Sech                     // 1/cosh((t − Centre)/Width), cut at the ends
	Blackman                 // 0.42 − 0.5 cos(2πt/T) + 0.08 cos(4πt/T)
	SineSquared              // sin²(πt/T)
	Sampled                  // straight lines between samples
)

// Pulse is a shape with its numbers, all in s from the start of the stretch.
// Its peak is one. Slopes of the numbers are their dual parts.
type Pulse struct {
	Shape      Shape
	Lasts      dual.Number
	Centre     dual.Number // Gaussian, Sech
	Width      dual.Number // Gaussian, Sech
	Rise, Fall dual.Number // Square
	Times      []float64   // Sampled: fractions of Lasts, increasing from 0 to 1
	Samples    []float64   // Sampled: values at Times
}

// constant reports whether there is no course: what it says does not depend on
// the numbers, so that values and slopes are laid out alike.
func (p *Pulse) constant() bool { return p == nil }

// envelope is a pulse for the engine: its course or the slope of its course.
type envelope struct {
	p     *Pulse
	slope bool
	work  []dual.Number
}

var _ lindblad.Series = (*envelope)(nil)

func (p *Pulse) envelope(slope bool) lindblad.Envelope {
	q := *p
	return &envelope{p: &q, slope: slope}
}

// At is the course at time t from the start of the stretch.
func (e *envelope) At(t float64) float64 {
	var c [1]float64
	e.Taylor(t, c[:])
	return c[0]
}

// Taylor fills c[k] with the k-th Taylor coefficient of the course at t; at a
// break it is that of the course to the right.
func (e *envelope) Taylor(t float64, c []float64) {
	if cap(e.work) < len(c) {
		e.work = make([]dual.Number, len(c))
	}
	w := e.work[:len(c)]
	e.p.series(t, w)
	for k := range c {
		c[k] = w[k].Real
		if e.slope {
			c[k] = w[k].Emag
		}
	}
}

// NextBreak is the next time after t at which the course is not smooth.
func (e *envelope) NextBreak(t float64) float64 {
	p := e.p
	next := math.Inf(1)
	consider := func(at float64) {
		if at > t {
			next = math.Min(next, at)
		}
	}
	switch p.Shape {
	case Square:
		consider(p.Rise.Real)
		consider(p.Lasts.Real - p.Fall.Real)
	case Sampled:
		for _, u := range p.Times {
			consider(u * p.Lasts.Real)
		}
	}
	return next
}

// series is the Taylor series of the course about t, in dual numbers: one
// recursion gives the course and its slope.
func (p *Pulse) series(t float64, c []dual.Number) {
	at := dual.Number{Real: t}
	switch p.Shape {
	case Gaussian:
		gaussianSeries(dual.Sub(at, p.Centre), p.Width, c)
	case Sech:
		sechSeries(dual.Sub(at, p.Centre), p.Width, c)
	case Blackman:
		turn := dual.Mul(twoPi, dual.Inv(p.Lasts))
		clear(c)
		addCosine(c, -0.5, turn, dual.Mul(turn, at))
		turn = dual.Scale(2, turn)
		addCosine(c, 0.08, turn, dual.Mul(turn, at))
		c[0].Real += 0.42
	case SineSquared:
		turn := dual.Mul(twoPi, dual.Inv(p.Lasts))
		clear(c)
		addCosine(c, -0.5, turn, dual.Mul(turn, at))
		c[0].Real += 0.5
	case Sampled:
		p.sampledSeries(at, c)
	default:
		p.rampSeries(at, c)
	}
}

// gaussianSeries solves g' = −(u/w²) g with u the distance from the centre.
func gaussianSeries(u, width dual.Number, c []dual.Number) {
	f := dual.Scale(-1, dual.Inv(dual.Mul(width, width)))
	c[0] = dual.Exp(dual.Scale(0.5, dual.Mul(f, dual.Mul(u, u))))
	for k := 0; k+1 < len(c); k++ {
		v := dual.Mul(u, c[k])
		if k > 0 {
			v = dual.Add(v, c[k-1])
		}
		c[k+1] = dual.Scale(1/float64(k+1), dual.Mul(f, v))
	}
}

// sechSeries solves y' = −y h/w, h' = y²/w for y = sech(u/w), h = tanh(u/w).
func sechSeries(u, width dual.Number, c []dual.Number) {
	inv := dual.Inv(width)
	x := dual.Mul(u, inv)
	sign := 1.0
	if x.Real < 0 {
		sign = -1
	}
	e := dual.Exp(dual.Scale(-sign, x)) // never overflows
	e2 := dual.Mul(e, e)
	down := dual.Inv(dual.Add(one, e2))
	c[0] = dual.Scale(2, dual.Mul(e, down))
	h := make([]dual.Number, len(c))
	h[0] = dual.Scale(sign, dual.Mul(dual.Sub(one, e2), down))
	for k := 0; k+1 < len(c); k++ {
		var yh, yy dual.Number
		for i := 0; i <= k; i++ {
			yh = dual.Add(yh, dual.Mul(c[i], h[k-i]))
			yy = dual.Add(yy, dual.Mul(c[i], c[k-i]))
		}
		f := dual.Scale(1/float64(k+1), inv)
		c[k+1] = dual.Scale(-1, dual.Mul(f, yh))
		h[k+1] = dual.Mul(f, yy)
	}
}

// addCosine adds size·cos(turn·τ + phase) as a series in τ.
func addCosine(c []dual.Number, size float64, turn, phase dual.Number) {
	cos, sin := dual.Cos(phase), dual.Sin(phase)
	f := dual.Number{Real: size}
	for k := range c {
		switch k % 4 {
		case 0:
			c[k] = dual.Add(c[k], dual.Mul(f, cos))
		case 1:
			c[k] = dual.Sub(c[k], dual.Mul(f, sin))
		case 2:
			c[k] = dual.Sub(c[k], dual.Mul(f, cos))
		default:
			c[k] = dual.Add(c[k], dual.Mul(f, sin))
		}
		f = dual.Scale(1/float64(k+1), dual.Mul(f, turn))
	}
}

// rampSeries is one, with sin²(πt/2 Rise) before it and the mirror image with
// Fall behind it. Where the two would overlap, both factors apply.
func (p *Pulse) rampSeries(at dual.Number, c []dual.Number) {
	clear(c)
	rising := at.Real < p.Rise.Real
	falling := at.Real >= p.Lasts.Real-p.Fall.Real && p.Fall.Real > 0
	ramp := func(dst []dual.Number, from, length dual.Number, sign float64) {
		turn := dual.Scale(sign*math.Pi, dual.Inv(length))
		addCosine(dst, -0.5, turn, dual.Mul(turn, from))
		dst[0].Real += 0.5
	}
	switch {
	case rising && falling:
		up, down := make([]dual.Number, len(c)), make([]dual.Number, len(c))
		ramp(up, at, p.Rise, 1)
		ramp(down, dual.Sub(at, p.Lasts), p.Fall, -1)
		for k := range c {
			for i := 0; i <= k; i++ {
				c[k] = dual.Add(c[k], dual.Mul(up[i], down[k-i]))
			}
		}
	case rising:
		ramp(c, at, p.Rise, 1)
	case falling:
		ramp(c, dual.Sub(at, p.Lasts), p.Fall, -1)
	default:
		c[0].Real = 1
	}
}

// sampledSeries is the straight line between the two samples round t.
func (p *Pulse) sampledSeries(at dual.Number, c []dual.Number) {
	clear(c)
	u := dual.Mul(at, dual.Inv(p.Lasts))
	k := p.interval(u.Real)
	slope := (p.Samples[k+1] - p.Samples[k]) / (p.Times[k+1] - p.Times[k])
	c[0] = dual.Add(dual.Number{Real: p.Samples[k]}, dual.Scale(slope, dual.Sub(u, dual.Number{Real: p.Times[k]})))
	if len(c) > 1 {
		c[1] = dual.Scale(slope, dual.Inv(p.Lasts))
	}
}

// interval finds the samples k, k+1 round u; at a sample it is the later one.
// A hair's breadth before a sample counts as at it, since times are rounded.
func (p *Pulse) interval(u float64) int {
	lo, hi := 0, len(p.Times)-1
	for hi-lo > 1 {
		if m := (lo + hi) / 2; p.Times[m] <= u+1e-14 {
			lo = m
		} else {
			hi = m
		}
	}
	return lo
}

// Integral is ∫ of the course over the stretch (s): the area of a pulse over
// 2π × its peak Rabi frequency.
func (p *Pulse) Integral() float64 {
	t, w := p.Lasts.Real, p.Width.Real
	switch p.Shape {
	case Gaussian:
		z := func(at float64) float64 { return math.Erf((at - p.Centre.Real) / (math.Sqrt2 * w)) }
		return w * math.Sqrt(math.Pi/2) * (z(t) - z(0))
	case Sech: // ∫ sech = 2 arctan(tanh(u/2))
		z := func(at float64) float64 { return 2 * math.Atan(math.Tanh((at-p.Centre.Real)/(2*w))) }
		return w * (z(t) - z(0))
	case Blackman:
		return 0.42 * t
	case SineSquared:
		return 0.5 * t
	case Sampled:
		sum := 0.0
		for k := 1; k < len(p.Times); k++ {
			sum += (p.Times[k] - p.Times[k-1]) * (p.Samples[k] + p.Samples[k-1]) / 2
		}
		return sum * t
	}
	return t - (p.Rise.Real+p.Fall.Real)/2 // a sin² ramp counts half
}

// line is the envelope of a chirp: (t/T − ½).
func line(lasts dual.Number) *Pulse {
	return &Pulse{Shape: Sampled, Lasts: lasts, Times: []float64{0, 1}, Samples: []float64{-0.5, 0.5}}
}
