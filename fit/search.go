package fit

import (
	"math"
	"slices"
)

// A search walks from one start to a minimum. Its buffers serve all searches
// of a fit.
type search struct {
	model       Model
	m, n        int
	set         Settings
	evaluations int

	x, trial           []float64
	r, trialR          []float64
	jacobian, spareJac []float64
	scale              []float64 // D
	squares            []float64
	chi2, offset       float64
	iterations         int
	status             Status
	started            bool
	badResidual        int
	badValue           float64
	linear             linearized
	best               snapshot
}

// A snapshot keeps a point that later steps may turn out not to improve on.
type snapshot struct {
	x, r, jacobian []float64
	chi2, offset   float64
}

func newSearch(model Model, m int, begin []float64, set Settings) *search {
	n := len(begin)
	return &search{
		model: model, m: m, n: n, set: set,
		x: make([]float64, n), trial: make([]float64, n),
		r: make([]float64, m), trialR: make([]float64, m),
		jacobian: make([]float64, m*n), spareJac: make([]float64, m*n),
		scale: make([]float64, n), squares: make([]float64, n),
		linear: linearized{
			lengths: make([]float64, n),
			low:     make([]float64, n), high: make([]float64, n),
			pinned: make([]bool, n),
		},
	}
}

// evaluate calls the model and tells whether all it returned is finite.
func (s *search) evaluate(x, r, jacobian []float64) (bool, error) {
	clear(r)
	clear(jacobian)
	s.evaluations++
	if err := s.model(x, r, jacobian); err != nil {
		return false, err
	}
	for i, v := range r {
		if math.IsNaN(v) || math.Abs(v) > 1e150 { // its square must be finite
			s.badResidual, s.badValue = i, v
			return false, nil
		}
	}
	for k, v := range jacobian {
		if math.IsNaN(v) || math.Abs(v) > 1e150 {
			s.badResidual, s.badValue = k/s.n, r[k/s.n]
			return false, nil
		}
	}
	return true, nil
}

func (s *search) run(begin []float64, reach float64) error {
	copy(s.x, begin)
	s.status, s.iterations, s.best = IterationLimit, 0, snapshot{chi2: math.Inf(1)}
	s.offset = math.Inf(1)
	finite, err := s.evaluate(s.x, s.r, s.jacobian)
	s.started = finite && err == nil
	if !s.started {
		return err
	}
	s.chi2 = sumOfSquares(s.r)
	clear(s.scale)
	s.rescale()
	radius := reach * weightedLength(s.scale, s.x)
	if radius == 0 {
		radius = reach
	}

	// Once a step changes χ² by less than its rounding, χ² cannot judge steps
	// any more, but the gradient still can: Gauss–Newton steps go on while
	// they bring the minimum nearer.
	idle, mark := 0, math.Inf(1)
	for s.iterations = 1; ; s.iterations++ {
		s.linear.at(s.jacobian, s.r, s.x, s.scale, s.set)
		toMinimum := s.linear.step(math.Inf(1))
		s.offset = s.offsetOf(toMinimum.predicted)
		if s.chi2 == 0 {
			s.status = ExactFit
			return nil
		}
		if s.offset <= s.set.Tolerance || weightedLength(s.scale, toMinimum.p) <= 1e-15*weightedLength(s.scale, s.x) {
			s.status = Converged
			return nil
		}
		polishing := toMinimum.predicted <= 1e-11*s.chi2 || math.Sqrt(toMinimum.predicted) <= 4*s.rounding()
		if polishing {
			if s.offset < 0.9*mark {
				idle, mark = 0, s.offset
			} else {
				idle++
			}
			if s.best.x == nil || s.offset < s.best.offset || s.fellBelowBest() {
				s.keep()
			}
			if idle >= 8 {
				s.restore()
				s.status = ConvergedRounding
				return nil
			}
		}
		if s.iterations >= s.set.Iterations {
			if polishing {
				s.restore()
				s.status = ConvergedRounding
			}
			return nil
		}

		moved := false
		for !moved {
			step := toMinimum
			length := weightedLength(s.scale, step.p)
			if length > radius && !polishing {
				step = s.linear.step(radius)
				length = weightedLength(s.scale, step.p)
			}
			for j := range s.trial {
				s.trial[j] = min(max(s.x[j]+step.p[j], s.set.Lower[j]), s.set.Upper[j])
			}
			if slices.Equal(s.trial, s.x) {
				return s.stop(polishing || s.stationary())
			}
			if !polishing {
				finite, err = s.evaluate(s.trial, s.trialR, nil)
				if err != nil {
					return err
				}
				ratio := -1.0
				if finite {
					ratio = s.reduction() / step.predicted
				}
				radius = nextRadius(radius, length, ratio, step.inside)
				if ratio < 1e-4 || math.IsNaN(ratio) {
					if radius <= 1e-16*weightedLength(s.scale, s.x) || radius < 1e-290 {
						return s.stop(s.offset < 1e-4 || s.stationary())
					}
					continue
				}
			}
			finite, err = s.evaluate(s.trial, s.trialR, s.spareJac)
			if err != nil {
				return err
			}
			if !finite {
				if polishing {
					return s.stop(true)
				}
				radius = 0.1 * length
				if radius <= 1e-16*weightedLength(s.scale, s.x) {
					return s.stop(s.stationary())
				}
				continue
			}
			moved = true
		}
		s.x, s.trial = s.trial, s.x
		s.r, s.trialR = s.trialR, s.r
		s.jacobian, s.spareJac = s.spareJac, s.jacobian
		s.chi2 = sumOfSquares(s.r)
		s.rescale()
	}
}

// stop ends a search that cannot move.
func (s *search) stop(rounding bool) error {
	s.status = Stalled
	if rounding {
		s.restore()
		s.status = ConvergedRounding
	}
	return nil
}

// rounding is about the error of ‖r‖ in double precision, if the model is a sum
// of terms as large as its parameters times their slopes.
func (s *search) rounding() float64 {
	return 0x1p-52 * weightedLength(s.linear.lengths, s.x)
}

// stationary tells that the residuals are at right angles to all columns of the
// Jacobian within the root of the rounding error, about as flat as χ² can show.
// Where two columns are nearly equal this holds at minima whose offset is large.
func (s *search) stationary() bool {
	l := &s.linear
	length := math.Sqrt(s.chi2)
	for j, pinned := range l.pinned {
		if pinned {
			continue
		}
		slope := 0.0
		for i := range l.rows {
			slope += l.j[i*l.n+j] * l.r[i]
		}
		if math.Abs(slope) > 1e-7*l.lengths[j]*length {
			return false
		}
	}
	return true
}

// offsetOf turns the improvement that the linearized problem promises into
// standard errors.
func (s *search) offsetOf(predicted float64) float64 {
	if s.set.ErrorsKnown {
		return math.Sqrt(predicted)
	}
	return math.Sqrt(predicted / s.chi2 * float64(max(s.m-s.n, 1)))
}

// nextRadius follows section 7 of Moré (1978).
func nextRadius(radius, length, ratio float64, inside bool) float64 {
	switch {
	case math.IsNaN(ratio) || ratio <= -1:
		return 0.1 * min(radius, length)
	case ratio <= 0.25:
		// The minimum of the parabola through value and slope at the point and
		// the value at the trial, for a slope of about −2 predicted.
		return min(max(0.5/(1-ratio), 0.1), 0.5) * min(radius, length)
	case ratio >= 0.75 || inside:
		return max(2*length, radius/2)
	}
	return radius
}

// reduction is χ² less that of the trial, as a sum of differences so that
// small ones survive.
func (s *search) reduction() float64 {
	sum := 0.0
	for i, a := range s.r {
		b := s.trialR[i]
		sum += (a - b) * (a + b)
	}
	return sum
}

// rescale lets D grow to the column lengths of the Jacobian.
func (s *search) rescale() {
	clear(s.squares)
	for i := range s.m {
		for j, v := range s.jacobian[i*s.n : i*s.n+s.n] {
			s.squares[j] += v * v
		}
	}
	for j, square := range s.squares {
		s.scale[j] = max(s.scale[j], math.Sqrt(square))
	}
	for j, d := range s.scale {
		if d == 0 {
			s.scale[j] = 1
		}
	}
}

func (s *search) keep() {
	s.best = snapshot{
		x: append(s.best.x[:0], s.x...), r: append(s.best.r[:0], s.r...),
		jacobian: append(s.best.jacobian[:0], s.jacobian...),
		chi2:     s.chi2, offset: s.offset,
	}
}

// fellBelowBest tells that χ² is lower than in the snapshot by more than
// rounding, whatever the offsets: the snapshot was a flat place on the way.
func (s *search) fellBelowBest() bool { return s.chi2 < s.best.chi2*(1-1e-9) }

func (s *search) restore() {
	if s.best.x == nil || s.fellBelowBest() {
		return
	}
	copy(s.x, s.best.x)
	copy(s.r, s.best.r)
	copy(s.jacobian, s.best.jacobian)
	s.chi2, s.offset = s.best.chi2, s.best.offset
}

// answer copies the end of the search.
func (s *search) answer() *Result {
	s.linear.at(s.jacobian, s.r, s.x, s.scale, s.set)
	res := &Result{
		Params: slices.Clone(s.x), Residuals: slices.Clone(s.r), Jacobian: slices.Clone(s.jacobian),
		ChiSquare: s.chi2, Status: s.status, Offset: s.offset, Iterations: s.iterations,
	}
	for j, pinned := range s.linear.pinned {
		switch {
		case s.set.Lower[j] == s.set.Upper[j]:
			res.Held = append(res.Held, j)
		case pinned:
			res.AtBound = append(res.AtBound, j)
		}
	}
	res.DegreesOfFreedom = s.m - s.n + len(res.Held) + len(res.AtBound)
	return res
}

func sumOfSquares(r []float64) float64 {
	sum := 0.0
	for _, v := range r {
		sum += v * v
	}
	return sum
}

// weightedLength is ‖Dx‖.
func weightedLength(d, x []float64) float64 {
	length := 0.0
	for j, v := range x {
		length = math.Hypot(length, d[j]*v)
	}
	return length
}
