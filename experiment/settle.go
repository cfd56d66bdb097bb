package experiment

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/num/dual"
)

// source is something that turns dials: a user dial by its value, or a spread
// by sigma × z.
type source struct {
	by       field // the value of the user dial, the sigma of the spread
	spread   int   // index of the spread, −1 for a user dial
	relative bool
	targets  []target
	name     string
}

// orderSources sorts the sources so that each is settled before it turns
// others. A circle is an error.
func (r *reader) orderSources() {
	s := r.e.shape
	var all []source
	for _, u := range s.userDials {
		all = append(all, source{by: u.value, spread: -1, relative: u.relative, targets: u.targets, name: "dial." + joinKey(u.name)})
	}
	for i, sp := range s.spreads {
		all = append(all, source{by: sp.sigma, spread: i, relative: sp.relative, name: "spread." + joinKey(sp.name),
			targets: []target{{dial: sp.dial, weights: []float64{1}}}})
	}
	turns := func(a, b source) bool { // a moves what b turns by
		for _, t := range a.targets {
			if t.dial == b.by {
				return true
			}
		}
		return false
	}
	for len(all) > 0 {
		free := -1
		for i, b := range all {
			blocked := false
			for _, a := range all {
				blocked = blocked || turns(a, b)
			}
			if !blocked {
				free = i
				break
			}
		}
		if free < 0 {
			r.fail(nil, all[0].name, "turns itself in a circle of dials; break the circle")
			return
		}
		s.order = append(s.order, all[free])
		all = append(all[:free:free], all[free+1:]...)
	}
}

// settler brings a vector of values to what the model sees: what user dials
// and spreads add, then what they multiply. Buffers are reused.
type settler struct {
	e       *Experiment
	x       []dual.Number
	add     []dual.Number
	factor  []dual.Number
	touched []field // without repeats
}

func newSettler(e *Experiment) *settler {
	n := len(e.values)
	s := &settler{e: e, x: make([]dual.Number, n), add: make([]dual.Number, n), factor: make([]dual.Number, n)}
	for _, src := range e.shape.order {
		for _, t := range src.targets {
			if firstOf(s.touched, t.dial) < 0 {
				s.touched = append(s.touched, t.dial)
			}
		}
	}
	return s
}

// settle fills s.x from values; direction is the free dial whose dual part is
// one (none: no slopes), z holds the spreads' deviates in units of sigma (nil:
// all zero).
func (s *settler) settle(values []float64, direction field, z []float64) error {
	for i, v := range values {
		s.x[i] = dual.Number{Real: v}
	}
	if direction != none {
		s.x[direction].Emag = 1
	}
	if len(s.touched) == 0 {
		return nil
	}
	for _, f := range s.touched {
		s.add[f], s.factor[f] = dual.Number{}, dual.Number{Real: 1}
	}
	// A source is finished when its own dial is: add what turned it first.
	for i := range s.e.shape.order {
		src := &s.e.shape.order[i]
		v := s.finished(src.by)
		if src.spread >= 0 {
			if z == nil {
				continue
			}
			v = dual.Scale(z[src.spread], v)
		}
		for _, t := range src.targets {
			change := polynomial(t.weights, v)
			if src.relative {
				s.factor[t.dial] = dual.Mul(s.factor[t.dial], dual.Add(dual.Number{Real: 1}, change))
			} else {
				s.add[t.dial] = dual.Add(s.add[t.dial], change)
			}
		}
	}
	for _, f := range s.touched {
		s.x[f] = s.finished(f)
		d := &s.e.shape.dials[f]
		if wrong := d.check(s.x[f].Real); wrong != "" {
			return &settleError{dial: d.Path, what: wrong, by: s.turners(f)}
		}
	}
	return nil
}

func firstOf(list []field, f field) int {
	for i, g := range list {
		if g == f {
			return i
		}
	}
	return -1
}

// finished is a dial with what turns it: first all additions, then all factors.
func (s *settler) finished(f field) dual.Number {
	if firstOf(s.touched, f) < 0 {
		return s.x[f]
	}
	return dual.Mul(dual.Add(s.x[f], s.add[f]), s.factor[f])
}

func polynomial(weights []float64, v dual.Number) dual.Number {
	var sum dual.Number
	for k := len(weights) - 1; k >= 0; k-- {
		sum = dual.Mul(v, dual.Add(dual.Number{Real: weights[k]}, sum))
	}
	return sum
}

func (s *settler) turners(f field) (names []string) {
	for _, src := range s.e.shape.order {
		for _, t := range src.targets {
			if t.dial == f {
				names = append(names, src.name)
			}
		}
	}
	return names
}

// settleError is a dial pushed out of its range by another one.
type settleError struct {
	dial, what string
	by         []string
}

func (e *settleError) Error() string {
	return fmt.Sprintf("%s %s after %s turned it", e.dial, e.what, orList(e.by))
}

// settled is settle without slopes or spreads.
func (e *Experiment) settled(values []float64) ([]dual.Number, error) {
	s := newSettler(e)
	err := s.settle(values, none, nil)
	return s.x, err
}

// widths lists the spreads that are wider than zero.
func (e *Experiment) widths(x []dual.Number) (active []int) {
	for i, sp := range e.shape.spreads {
		if math.Abs(x[sp.sigma].Real) > 0 {
			active = append(active, i)
		}
	}
	return active
}
