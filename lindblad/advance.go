package lindblad

// propagator is Q = exp(Lτ) − 1 with its slopes along the directions that L
// depends on.
type propagator struct {
	duration   float64
	q          full
	directions []int32
	worst      float64 // how far it may lead out of the cone: rounding
}

// slots holds the propagators of one stretch that this run used last.
type slots struct {
	list [4]propagator
	used int
	next int
}

// advance carries the state through a constant stretch for a duration (1 for
// an ideal rotation).
func (s *Solver) advance(i int, duration float64) error {
	if s.methods[i] == bySeries { // a rotation in no time
		c := s.stretches[i]
		c.Ideal = false
		c.Lasts = duration
		accuracy := 0.1 * s.accuracy / s.plays[i]
		s.watch += accuracy
		f := field{&c, s.theta, s.dtheta}
		return s.shaped.run(s.ctx, s.l, &f, s.x, s.k, duration, accuracy, &s.stats, func(float64, float64, within) error { return nil })
	}
	p := s.propagator(i, duration)
	s.apply(p)
	s.watch += p.worst
	return nil
}

// apply sets x += Qx for value and tangents.
func (s *Solver) apply(p *propagator) {
	n := s.l.n
	s.stats.Applied++
	for q := s.k; q >= 0; q-- {
		p.q.times(s.y[q*n:], 0, s.x[q*n:], false)
	}
	for m, j := range p.directions {
		p.q.times(s.y[(1+int(j))*n:], 1+m, s.x, true)
	}
	x, y := s.x[:(1+s.k)*n], s.y[:(1+s.k)*n]
	for i := range x {
		x[i] += y[i]
	}
}

// propagator finds or computes the propagator of stretch i over a duration.
func (s *Solver) propagator(i int, duration float64) *propagator {
	w := &s.slots[i]
	for j := range w.list[:w.used] {
		if p := &w.list[j]; p.duration == duration {
			return p
		}
	}
	p := &w.list[w.next]
	w.next = (w.next + 1) % len(w.list)
	w.used = min(w.used+1, len(w.list))
	p.duration = duration
	p.directions = p.directions[:0]

	st := &s.stretches[i]
	s.key = append(append(s.key[:0], duration), st.Coef...)
	for j := range st.Slopes {
		if anyNonZero(st.Slopes[j].Coef) {
			p.directions = append(p.directions, int32(j))
			s.key = append(s.key, st.Slopes[j].Coef...)
		}
	}
	if s.memory.get(s.l, s.key, &p.q, &p.worst) {
		s.stats.Remembered++
		return p
	}
	s.stats.Exponentials++
	s.exp.reset(s.l, len(p.directions))
	vals := s.needVals()
	s.l.generator(vals, st.Coef)
	s.exp.put(s.l, 0, vals, duration)
	for m, j := range p.directions {
		s.l.generator(vals, st.Slopes[j].Coef)
		s.exp.put(s.l, 1+m, vals, duration)
	}
	q, squarings, size := s.exp.run(s.l)
	s.limited(1e-16 * size)
	p.q.copyFrom(q)
	p.worst = rounding(s.l.n, squarings)
	s.memory.put(s.l, s.key, q, p.worst)
	return p
}
