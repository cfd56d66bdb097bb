package ode

import "gonum.org/v1/gonum/floats"

// stages computes k_from … k_{to−1} of a step of size h from s.t and s.y. This
// is the only place where a method becomes arithmetic. It leaves the argument of
// the last stage in s.next: at to = Stages that is the state after the step.
func (s *Solver) stages(f Func, from, to int, h float64) error {
	for i := from; i < to; i++ {
		s.sum(s.next, s.num.rows[i])
		for j, v := range s.next {
			s.next[j] = s.y[j] + h*v
		}
		t := s.t + s.num.nodes[i]*h
		if s.num.nodes[i] == 1 {
			t = s.ahead
		}
		if err := s.call(f, t, s.next, s.k[i]); err != nil {
			return err
		}
	}
	return nil
}

// sum sets out to Σ coef·k of the terms.
func (s *Solver) sum(out []float64, terms []term) {
	clear(out)
	for _, a := range terms {
		floats.AddScaled(out, a.coef, s.k[a.stage])
	}
}

func (s *Solver) call(f Func, t float64, y, dydt []float64) error {
	s.stats.Calls++
	return f(t, y, dydt)
}
