package ode

// prepare computes what within needs, once in a step that was taken from s.y to
// s.end. With y₀, y₁ the states and k₀, k₁ the slopes at both ends,
//
//	r₁ = y₁ − y₀, r₂ = h k₀ − r₁, r₃ = r₁ − h k₁ − r₂, r_{3+m} = h Σ d_mj k_j.
func (s *Solver) prepare(f Func, h float64) error {
	if s.prepared {
		return nil
	}
	last := s.tab.Stages
	if err := s.stages(f, last, len(s.num.rows), h); err != nil {
		return err
	}
	first, k := s.k[0], s.k[last-1]
	for i := range s.y {
		d := s.end[i] - s.y[i]
		s.r[0][i] = d
		s.r[1][i] = h*first[i] - d
		s.r[2][i] = d - h*k[i] - s.r[1][i]
	}
	for m, row := range s.num.dense {
		r := s.r[3+m]
		s.sum(r, row)
		for i := range r {
			r[i] *= h
		}
	}
	s.prepared = true
	return nil
}

// within sets s.out to the state at the fraction u of the prepared step,
//
//	y(u) = y₀ + u(r₁ + (1−u)(r₂ + u(r₃ + (1−u)(r₄ + …)))),
//
// Hairer, Nørsett, Wanner, section II.6.
func (s *Solver) within(u float64) {
	last := len(s.r) - 1
	copy(s.out, s.r[last])
	for m := last; m >= 0; m-- {
		x := u
		if m%2 == 1 {
			x = 1 - u
		}
		below := s.y
		if m > 0 {
			below = s.r[m-1]
		}
		for i, v := range s.out {
			s.out[i] = below[i] + x*v
		}
	}
}
