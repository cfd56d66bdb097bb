package lindblad

import (
	"errors"
	"math"

	"rhotrace/ode"
)

// Stretches whose envelopes have no Taylor series are carried by the adaptive
// Runge–Kutta pair 8(5,3) of package ode: for x and its tangents together,
//
//	dx/dt = L(t)x,  dx_j/dt = L(t)x_j + (∂_jL)(t)x.
//
// The error of each step is held per unit of time, so that the errors of all
// steps sum to less than what is asked: the map contracts. A step whose state
// leaves the cone of density matrices by more than the accuracy is refused and
// taken again, shorter. Settings.RungeKutta carries every stretch so, as an
// independent method.

// carry is the right-hand side for one stretch.
type carry struct {
	s     *Solver
	f     field
	coef  []float64 // of the pieces at this time
	slope []float64 // along one direction
	vals  []float64 // generator on the pattern
	scale []float64 // of each direction, so that one error bound serves all
}

// coefficients sets c.coef to those at time t of the stretch.
func (c *carry) coefficients(t float64) {
	st := c.f.stretch
	copy(c.coef, st.Coef)
	for i := range st.Terms {
		term := &st.Terms[i]
		c.coef[term.Piece] += term.Amplitude * at(term.Envelope, t) * math.Cos(c.phase(term, t))
	}
}

func at(e Envelope, t float64) float64 {
	if e == nil {
		return 1
	}
	return e.At(t)
}

func (c *carry) phase(term *Term, t float64) float64 {
	phase := term.Phase
	if term.Rotor >= 0 {
		phase += c.f.theta[term.Rotor] + turn(c.f.stretch.Rotors[term.Rotor], t)
	}
	return phase
}

// slopes sets c.slope to ∂_j of the coefficients at time t.
func (c *carry) slopes(j int, t float64) {
	st := c.f.stretch
	d := &st.Slopes[j]
	clear(c.slope)
	copy(c.slope, d.Coef)
	for i := range st.Terms {
		term := &st.Terms[i]
		var ts TermSlope
		if d.Terms != nil {
			ts = d.Terms[i]
		}
		moved := ts.Phase
		if term.Rotor >= 0 {
			moved += c.f.dtheta[j][term.Rotor]
			if d.Rotors != nil {
				moved += d.Rotors[term.Rotor] * t
			}
		}
		sin, cos := math.Sincos(c.phase(term, t))
		e := at(term.Envelope, t)
		v := ts.Amplitude*e*cos - term.Amplitude*e*sin*moved
		if ts.Envelope != nil {
			v += term.Amplitude * ts.Envelope.At(t) * cos
		}
		c.slope[term.Piece] += v
	}
}

// rate is the right-hand side of the value and, scaled, of the tangents.
func (c *carry) rate(t float64, y, dydt []float64) error {
	n, l := c.s.l.n, c.s.l
	c.coefficients(t)
	l.generator(c.vals, c.coef)
	for q := 0; q <= c.s.k; q++ {
		l.times(dydt[q*n:(q+1)*n], c.vals, y[q*n:(q+1)*n])
	}
	for j := range c.f.stretch.Slopes {
		c.slopes(j, t)
		l.generator(c.vals, c.slope)
		part := dydt[(1+j)*n : (2+j)*n]
		l.times(c.s.y[:n], c.vals, y[:n])
		for i, v := range c.s.y[:n] {
			part[i] += v * c.scale[j]
		}
	}
	return nil
}

// series reports whether all envelopes of a stretch have Taylor series.
func (st *Stretch) series() bool {
	has := func(e Envelope) bool {
		_, ok := e.(Series)
		return e == nil || ok
	}
	for i := range st.Terms {
		if !has(st.Terms[i].Envelope) {
			return false
		}
		for j := range st.Slopes {
			if d := st.Slopes[j].Terms; d != nil && !has(d[i].Envelope) {
				return false
			}
		}
	}
	return true
}

// playRungeKutta carries a stretch from sample to sample and break to break.
func (s *Solver) playRungeKutta(i int) error {
	st := &s.stretches[i]
	n, k := s.l.n, s.k
	c := &carry{s: s, f: field{st, s.theta, s.dtheta}, coef: make([]float64, len(s.l.pieces)), slope: make([]float64, len(s.l.pieces)),
		vals: make([]float64, len(s.l.col)), scale: make([]float64, k)}
	s.y = sized(s.y, (1+k)*n)
	y := append([]float64(nil), s.x[:(1+k)*n]...)
	for j := range c.scale { // tangents in units of their size over this stretch
		c.scale[j] = 1 / math.Max(c.tangentSize(j, st.Lasts), 1e-300)
		for m := (1 + j) * n; m < (2+j)*n; m++ {
			y[m] *= c.scale[j]
		}
	}
	accuracy := math.Max(s.perTime*st.Lasts, 1e-15)
	clock, start := &s.clock, s.clock.now
	for from := 0.0; from < st.Lasts; {
		to := c.f.breakAfter(from, st.Lasts)
		var times []float64
		first := clock.next
		for m := first; clock.running && m < clock.samples && clock.at(m) < start+to-clock.same; m++ {
			times = append(times, math.Min(math.Max(clock.at(m)-start, from), to))
		}
		solver := ode.NewSolver((1+k)*n, ode.DormandPrince853, ode.Settings{Accuracy: accuracy * (to - from) / st.Lasts, PerTime: true,
			LargestStep: st.Lasts / 8,
			Accept:      func(_ float64, y []float64) bool { return s.cone.within(s.l, y[:n], s.accuracy) }})
		stats, err := solver.Solve(s.ctx, c.rate, from, y, append(times, to), func(m int, t float64, y []float64) error {
			if m == len(times) {
				return nil
			}
			return s.handRungeKutta(c, t, y)
		})
		s.stats.Steps += stats.Steps
		s.stats.Rejected += stats.Rejected + stats.Vetoed
		s.stats.Products += stats.Calls
		if err != nil {
			if cause := s.ctx.Err(); cause != nil && errors.Is(err, cause) {
				return cause
			}
			return errors.New("lindblad: " + err.Error())
		}
		from = to
	}
	copy(s.x, y)
	c.unscale(s.x)
	if s.slides(st) {
		c.slide(s.x, st.Lasts, func(j int) float64 { return st.Slopes[j].Lasts })
	}
	s.watch = math.Inf(1)
	s.pass(st)
	return nil
}

// tangentSize estimates how large the tangent j becomes: what it is, or what
// the stretch adds to it.
func (c *carry) tangentSize(j int, lasts float64) float64 {
	n := c.s.l.n
	size := largest(c.s.x[(1+j)*n : (2+j)*n])
	if j >= len(c.f.stretch.Slopes) {
		return size
	}
	for m := 0; m <= 4; m++ {
		c.slopes(j, lasts*float64(m)/4)
		size = math.Max(size, largest(c.slope)*lasts)
	}
	return size
}

func (c *carry) unscale(y []float64) {
	n := c.s.l.n
	for j, f := range c.scale {
		for m := (1 + j) * n; m < (2+j)*n; m++ {
			y[m] /= f
		}
	}
}

// slide adds Lx times what a time moves by to the tangents.
func (c *carry) slide(y []float64, t float64, by func(j int) float64) {
	n := c.s.l.n
	c.coefficients(t)
	c.s.l.generator(c.vals, c.coef)
	c.s.l.times(c.s.y[:n], c.vals, y[:n])
	for j := range c.scale {
		d := 0.0
		if j < len(c.f.stretch.Slopes) || c.s.clock.running {
			d = by(j)
		}
		for i, v := range c.s.y[:n] {
			y[(1+j)*n+i] += v * d
		}
	}
}

func (s *Solver) handRungeKutta(c *carry, t float64, y []float64) error {
	clock := &s.clock
	copy(s.out, y)
	c.unscale(s.out)
	fraction := clock.fraction(clock.next)
	c.slide(s.out, t, func(j int) float64 { return fraction*clock.dtotal[j] - clock.dnow[j] })
	s.guard(s.out[:s.l.n])
	return s.handOut()
}

// within reports whether no eigenvalue of the state is below −limit.
func (w *cone) within(l *Layout, x []float64, limit float64) bool {
	w.reset(l)
	w.saved = append(w.saved[:0], x...)
	for _, p := range l.pops {
		w.saved[p] += limit
	}
	for b := range w.blocks {
		if !w.positive(l, w.saved, b) {
			return false
		}
	}
	return true
}
