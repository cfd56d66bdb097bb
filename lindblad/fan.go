package lindblad

import (
	"context"
	"fmt"
	"math"
)

// Fan plays an order once for each duration of one of its stretches, as Run
// does with that stretch's Lasts set to durations[k], and emits the state at
// the end of the order. Where everything is constant the work is shared: what
// comes before the stretch is played once, the stretch is stepped from one
// duration to the next, and what comes after it is one map. Durations that
// increase in equal steps share one propagator. Slope.Lasts of the stretch
// holds for every duration.
func (s *Solver) Fan(ctx context.Context, x0 []float64, dx0 [][]float64, stretches []Stretch, order []Node, fan int, durations []float64,
	emit func(k int, x []float64, dx [][]float64) error) error {
	if fan < 0 || fan >= len(stretches) {
		panic(fmt.Sprintf("lindblad: a fan over stretch %d of %d", fan, len(stretches)))
	}
	at := fanPlace(order, fan)
	if at < 0 || stretches[fan].Ideal || !increasing(durations) {
		return s.fanByRuns(ctx, x0, dx0, stretches, order, fan, durations, emit)
	}
	if err := s.begin(ctx, x0, dx0, stretches, order, Record{During: -1}); err != nil {
		return err
	}
	for _, n := range order {
		if !s.constant(n) {
			return s.fanByRuns(ctx, x0, dx0, stretches, order, fan, durations, emit)
		}
	}
	if err := s.playAll(order[:at]); err != nil {
		return err
	}
	rest := s.compose(new(full), order[at+1:])
	n := s.l.n
	st := &s.stretches[fan]
	slides := s.slides(st)
	if slides {
		s.l.generator(s.needVals(), st.Coef)
	}
	vals := append([]float64(nil), s.vals...)
	now, usual := 0.0, 0.0
	if len(durations) > 1 {
		usual = (durations[len(durations)-1] - durations[0]) / float64(len(durations)-1)
	}
	same := 1e-13 * durations[len(durations)-1]
	after := make([]float64, (1+s.k)*n)
	for k, d := range durations {
		if k%256 == 255 && ctx.Err() != nil {
			return ctx.Err()
		}
		if step := d - now; step > same {
			if math.Abs(step-usual) <= same {
				step = usual
			}
			if err := s.advance(fan, step); err != nil {
				return err
			}
			now += step
		}
		copy(s.out, s.x)
		if slides {
			s.l.times(s.y[:n], vals, s.x[:n])
			for j := range st.Slopes {
				if f := st.Slopes[j].Lasts; f != 0 {
					for i, v := range s.y[:n] {
						s.out[(1+j)*n+i] += v * f
					}
				}
			}
		}
		if at+1 < len(order) && rest.n > 0 {
			for q := 0; q <= s.k; q++ {
				rest.times(after[q*n:], 0, s.out[q*n:], false)
				if q > 0 {
					rest.times(after[q*n:], q, s.out, true)
				}
			}
			for i, v := range after {
				s.out[i] += v
			}
		}
		if !allFinite(s.out) {
			return errNotFinite
		}
		s.guard(s.out[:n])
		if err := emit(k, s.out[:n], s.dx); err != nil {
			return err
		}
	}
	return nil
}

// fanPlace is the place of a stretch that the order plays once and outside
// groups; −1 otherwise.
func fanPlace(order []Node, fan int) int {
	place := -1
	for i, n := range order {
		switch {
		case n.Group != nil && plays(n.Group, fan):
			return -1
		case n.Group == nil && n.Stretch == fan && place >= 0:
			return -1
		case n.Group == nil && n.Stretch == fan:
			place = i
		}
	}
	return place
}

func plays(order []Node, stretch int) bool {
	for _, n := range order {
		if n.Group == nil && n.Stretch == stretch || plays(n.Group, stretch) {
			return true
		}
	}
	return false
}

func increasing(durations []float64) bool {
	for i, d := range durations {
		if !(d >= 0) || i > 0 && d < durations[i-1] {
			return false
		}
	}
	return len(durations) > 0
}

// constant reports whether a node is carried by propagators that stay.
func (s *Solver) constant(n Node) bool {
	g := groupMap{exact: true}
	s.measure([]Node{n}, 1, &g)
	return g.exact
}

// fanByRuns is Fan without sharing.
func (s *Solver) fanByRuns(ctx context.Context, x0 []float64, dx0 [][]float64, stretches []Stretch, order []Node, fan int, durations []float64,
	emit func(k int, x []float64, dx [][]float64) error) error {
	own := append([]Stretch(nil), stretches...)
	for k, d := range durations {
		own[fan].Lasts = d
		err := s.Run(ctx, x0, dx0, own, order, Record{During: -1}, func(_ int, x []float64, dx [][]float64) error { return emit(k, x, dx) })
		if err != nil {
			return err
		}
	}
	return nil
}
