package lindblad

import "math"

// method is how a stretch is carried.
type method uint8

const (
	byPropagator method = iota // a dense exponential, applied to states
	bySeries                   // in time, see shaped; constant stretches too
	byRungeKutta               // in time, where an envelope has no series
)

// denseLimit is the largest state with dense propagators.
const denseLimit = 400

// choose picks the method of every stretch of a run by counting
// multiplications. Constant stretches get a propagator unless the state is
// large and few states are asked for: then series act on the state itself. The
// choice depends on what is asked only, never on what a memory happens to hold,
// so that results have the same bits.
func (s *Solver) choose(order []Node) {
	s.methods = sized(s.methods, len(s.stretches))
	s.plays = zeroed(s.plays, len(s.stretches))
	s.countPlays(order, 1)
	var total float64
	for i := range s.stretches {
		if st := &s.stretches[i]; !st.Ideal {
			total += s.plays[i] * st.Lasts
		}
	}
	for i := range s.stretches {
		st := &s.stretches[i]
		duration := st.Lasts
		if st.Ideal {
			duration = 1
		}
		s.methods[i] = byPropagator
		switch {
		case !st.Ideal && (s.rungeKutta || !st.series()):
			s.methods[i] = byRungeKutta
		case len(st.Terms) > 0 || s.l.n > denseLimit:
			s.methods[i] = bySeries
		case s.l.n > 32 && duration > 0:
			samples := 0.0
			if s.rec.During == i {
				samples = float64(s.rec.Samples)
			} else if s.rec.During < 0 && total > 0 && !st.Ideal {
				samples = float64(s.rec.Samples) * duration / total * s.plays[i]
			}
			if s.seriesCost(st, duration, samples, s.plays[i]) < s.propagatorCost(st, duration, samples, s.plays[i]) {
				s.methods[i] = bySeries
			}
		}
	}
}

func (s *Solver) countPlays(order []Node, times float64) {
	for i := range order {
		if n := &order[i]; n.Group != nil {
			s.countPlays(n.Group, times*float64(n.Repeat))
		} else {
			s.plays[n.Stretch] += times
		}
	}
}

// propagatorCost counts the multiplications of two exponentials (one between
// samples, one for the rest) and of their applications. A memory is expected to
// spare most exponentials.
func (s *Solver) propagatorCost(st *Stretch, duration, samples, plays float64) float64 {
	l := s.l
	step := duration
	different := 1.0
	if samples > 1 {
		step = duration * plays / samples
		different = 2
	}
	products := 6 + math.Max(0, math.Log2(s.size(st)*step/radius))
	build := different * products * l.closure.multiplications()
	if s.memory != nil {
		build /= 16
	}
	return (1+2*float64(s.k))*build + (1+float64(s.k))*(samples+plays)*l.closure.elements()
}

// seriesCost counts the multiplications of Taylor steps on the state, which
// reach h‖L‖ of about a quarter of the order, and of evaluating the polynomials
// at samples. Sparse products cost some twice a dense one.
func (s *Solver) seriesCost(st *Stretch, duration, samples, plays float64) float64 {
	const order = 24
	steps := math.Ceil(s.size(st) * duration / (order / 4))
	return (1 + 2*float64(s.k)) * order * (2*plays*steps*float64(len(s.l.col)) + samples*float64(s.l.n))
}

// size is the norm of the generator: the smaller of the largest sums of a row
// and of a column.
func (s *Solver) size(st *Stretch) float64 {
	l := s.l
	vals := s.needVals()
	l.generator(vals, st.Coef)
	sums := zeroed(s.y, l.n)
	var rows, columns float64
	for i := 0; i < l.n; i++ {
		var sum float64
		for e := l.start[i]; e < l.start[i+1]; e++ {
			v := math.Abs(vals[e])
			sum += v
			sums[l.col[e]] += v
		}
		rows = math.Max(rows, sum)
	}
	for _, v := range sums {
		columns = math.Max(columns, v)
	}
	return math.Min(rows, columns)
}
