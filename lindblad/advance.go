package lindblad

// parts is a propagator Q = P − 1 and its slopes, nil where zero.
type parts struct {
	q []float64
	e [][]float64
}

// advance carries the state through a constant stretch for a duration (1 for
// an ideal rotation).
func (s *Solver) advance(i int, duration float64) error {
	st := &s.stretches[i]
	if s.l.n > denseLimit { // an ideal rotation of a large state: integrate over unit time
		c := *st
		c.Ideal = false
		c.Lasts = duration
		s.taylor.prepare(s.l, &c, s.k, orderFor(0.1*s.accuracy))
		f := field{&c, s.theta, s.dtheta}
		return s.taylor.integrate(s.ctx, &f, s.x, duration, 0.1*s.accuracy, &s.stats, func(float64, float64) error { return nil })
	}
	p := s.propagator(st, duration)
	s.apply(p)
	return nil
}

// apply sets x += Qx for value and tangents.
func (s *Solver) apply(p parts) {
	n := s.l.n
	s.stats.Applied++
	for q := s.k; q >= 0; q-- {
		x := s.x[q*n : (q+1)*n]
		y := s.y[q*n : (q+1)*n]
		matVec(y, p.q, x, n, false)
		if q > 0 && p.e[q-1] != nil {
			matVec(y, p.e[q-1], s.x[:n], n, true)
		}
	}
	for i, v := range s.y[:(1+s.k)*n] {
		s.x[i] += v
	}
}

func matVec(y, a, x []float64, n int, add bool) {
	for i := range y[:n] {
		var v float64
		for j, w := range a[i*n : i*n+n] {
			v += w * x[j]
		}
		if add {
			y[i] += v
		} else {
			y[i] = v
		}
	}
}

// propagator finds or computes exp(Lτ) − 1 and its slopes along the directions
// that the coefficients depend on.
func (s *Solver) propagator(st *Stretch, duration float64) parts {
	n := s.l.n
	p := parts{e: make([][]float64, s.k)}
	p.q = s.memory.get(s.l, s.keyOf(st, -1, duration))
	var missing []int
	for j := range st.Slopes {
		if !anyNonZero(st.Slopes[j].Coef) {
			continue
		}
		if p.e[j] = s.memory.get(s.l, s.keyOf(st, j, duration)); p.e[j] == nil {
			missing = append(missing, j)
		}
	}
	if p.q != nil && len(missing) == 0 {
		s.stats.Remembered++
		return p
	}
	s.stats.Exponentials++
	k := len(missing)
	s.exp.reset(n, k, s.l.pops)
	vals := s.needVals()
	s.l.generator(vals, st.Coef)
	s.l.dense(s.exp.a[:n*n], vals, duration)
	for m, j := range missing {
		s.l.generator(vals, st.Slopes[j].Coef)
		s.l.dense(s.exp.a[(1+m)*n*n:(2+m)*n*n], vals, duration)
	}
	r := s.exp.run(k)
	p.q = append([]float64(nil), r[:n*n]...)
	s.memory.put(s.l, s.keyOf(st, -1, duration), p.q)
	for m, j := range missing {
		p.e[j] = append([]float64(nil), r[(1+m)*n*n:(2+m)*n*n]...)
		s.memory.put(s.l, s.keyOf(st, j, duration), p.e[j])
	}
	return p
}

// keyOf is the key of a propagator (direction −1) or of its slope.
func (s *Solver) keyOf(st *Stretch, direction int, duration float64) []float64 {
	s.key = append(append(s.key[:0], duration), st.Coef...)
	if direction >= 0 {
		s.key = append(s.key, st.Slopes[direction].Coef...)
	}
	return s.key
}

// dense spreads a generator on the pattern, times f, over a full matrix.
func (l *Layout) dense(a, vals []float64, f float64) {
	clear(a)
	for i := 0; i < l.n; i++ {
		for e := l.start[i]; e < l.start[i+1]; e++ {
			a[i*l.n+int(l.col[e])] = vals[e] * f
		}
	}
}
