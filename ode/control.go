package ode

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// Bounds and exponents of the control, as in Hairer, Nørsett, Wanner, section
// II.4, and its PI part as in E. Hairer, G. Wanner, Solving Ordinary Differential
// Equations II, 2nd ed. (1996), section IV.2: the next step is
//
//	h · safety · e^{−(1−¾β)/q} · e_before^{β/q},
//
// e the estimated error over the one allowed, q the power of h in e.
const (
	safety = 0.9
	beta   = 0.2
	shrink = 0.2  // the least factor of one step to the next
	grow   = 1.5  // the largest: an estimate that passes through zero must not start a leap
	halve  = 0.5  // after a veto
	tenth  = 0.1  // after a state that is not finite
	least  = 1e-4 // error taken to stand before the first step, and at least
)

// control remembers the error of the last step that was taken.
type control struct {
	before  float64
	refused bool // the step before was not taken: do not grow
}

// taken returns the factor of the next step after one with error e ≤ 1.
func (c *control) taken(e, q float64) float64 {
	x := math.Max(e, 1e-20)
	factor := clamp(safety*math.Pow(x, -(1-0.75*beta)/q)*math.Pow(c.before, beta/q), shrink, grow)
	if c.refused {
		factor = math.Min(factor, 1)
	}
	c.before, c.refused = math.Max(e, least), false
	return factor
}

// missed returns the factor of the next attempt after one with error e > 1.
func (c *control) missed(e, q float64) float64 {
	c.refused = true
	return clamp(safety*math.Pow(e, -1/q), shrink, safety)
}

func clamp(x, low, high float64) float64 { return math.Max(low, math.Min(x, high)) }

// estimate returns the Euclidean norm of the estimated error of a step of size h.
// With two embedded methods it is |h| e₁²/√(e₁² + e₂²/100), e₁ of the higher
// order: section II.10, a value that shrinks as h^p and distrusts e₁ where the
// lower one is large.
func (s *Solver) estimate(h float64) float64 {
	var e [2]float64
	for i, row := range s.num.errors {
		s.sum(s.out, row)
		e[i] = floats.Norm(s.out, 2)
	}
	if len(s.num.errors) == 1 || e[0] == 0 {
		return math.Abs(h) * e[0]
	}
	return math.Abs(h) * e[0] * (e[0] / math.Hypot(e[0], e[1]/10))
}

// allowed returns the error that a step of size h may have, and the power of h
// with which the ratio of both shrinks.
func (s *Solver) allowed(h float64) (bound, power float64) {
	p := float64(s.tab.Order)
	if s.set.PerTime {
		return s.set.Accuracy * math.Abs(h/s.span), p - 1
	}
	return s.set.Accuracy, p
}

// firstStep returns the size of the first step, much as in section II.4. A small
// step of Euler's method shows the second derivative; τ = |dy/dt|/|d²y/dt²| is
// taken for the time scale, so that |dy/dt| τ (h/τ)^p = Accuracy/100. Unlike the
// formula there it does not depend on the unit of time. k₀ holds the slope at s.t.
func (s *Solver) firstStep(f Func) (float64, error) {
	span := math.Abs(s.span)
	most := math.Min(span, s.set.LargestStep)
	if s.set.FirstStep > 0 {
		return math.Min(s.set.FirstStep, most), nil
	}
	size, slope := floats.Norm(s.y, 2), floats.Norm(s.k[0], 2)
	h := 1e-6 * span
	if tiny := 1e-5 * s.set.Accuracy; size > tiny && slope > tiny {
		h = 0.01 * size / slope
	}
	h = math.Min(h, most)
	towards := math.Copysign(h, s.span)
	for i, v := range s.k[0] {
		s.next[i] = s.y[i] + towards*v
	}
	if err := s.call(f, s.t+towards, s.next, s.k[1]); err != nil {
		return 0, err
	}
	bend := floats.Distance(s.k[1], s.k[0], 2) / h
	if !finite(bend) {
		return h, nil
	}
	h *= 100
	if slope = math.Max(slope, bend*h/100); bend > 0 {
		scale := slope / bend
		h = math.Min(h, scale*math.Pow(0.01*s.set.Accuracy/(slope*scale), 1/float64(s.tab.Order)))
	}
	return math.Min(h, most), nil
}

// smallest returns the size below which a step is lost in the rounding of t, or
// could not reach the last time in any number of steps that a computer takes.
func (s *Solver) smallest() float64 {
	t := math.Abs(s.t)
	return math.Max(8*(math.Nextafter(t, math.Inf(1))-t), 1e-15*math.Abs(s.span))
}

func finite(x float64) bool { return x-x == 0 }
