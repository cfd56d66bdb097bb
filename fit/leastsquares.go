package fit

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// A Model gives, at params, the m residuals r_i = (model_i − data_i)/σ_i, or
// with the opposite sign, and where jacobian is not nil also the slopes
// ∂r_i/∂p_j at jacobian[i*n+j] (row-major, m×n). Both slices arrive zeroed.
//
// A residual that is NaN or infinite says that the model has no value there;
// the search then takes a shorter step. An error ends the search and is handed
// on, so a model that watches a context returns the context's error.
type Model func(params, residuals, jacobian []float64) error

// Settings of LeastSquares. The zero value, like nil, means the defaults.
type Settings struct {
	// Lower and Upper bound the parameters, ±Inf where there is no bound.
	// Default (nil): no bounds. Lower = Upper holds a parameter.
	Lower, Upper []float64
	// Tolerance is the distance from the minimum of the linearized problem at
	// which the search ends, in standard errors (the relative offset of D. M.
	// Bates, D. G. Watts, Technometrics 23, 179 (1981)). Default: 1e-10.
	Tolerance float64
	// Iterations is the largest number of Jacobians that one search computes.
	// Default: 5000.
	Iterations int
	// Reach bounds the first step, in units of the scaled length of the start.
	// Default: 1; larger values trust the first slopes further.
	Reach float64
	// Restarts is the largest number of further searches, made when one ends
	// unconverged or where the data leave a direction open. They begin
	// with other first steps, then elsewhere; the best answer is kept.
	// Default: 24. Negative: none.
	Restarts int
	// ErrorsKnown says that residuals are divided by true standard deviations,
	// so that the covariance is (JᵀJ)⁻¹. Default (false): the covariance is
	// multiplied by the reduced chi-square, as if all errors shared one
	// unknown factor.
	ErrorsKnown bool
	// SlopeError is the relative precision of the Jacobian; a direction whose
	// singular value, columns scaled to one, is smaller than this times the
	// largest is called undetermined. Default: 1e-13.
	SlopeError float64
}

func (s *Settings) withDefaults(n int) (Settings, error) {
	var t Settings
	if s != nil {
		t = *s
	}
	for _, v := range []struct {
		name  string
		value float64
	}{{"Tolerance", t.Tolerance}, {"Reach", t.Reach}, {"SlopeError", t.SlopeError}} {
		if !(v.value >= 0) || math.IsInf(v.value, 1) {
			return t, fmt.Errorf("fit: %s is %g; it must be a positive number, or 0 for the default", v.name, v.value)
		}
	}
	if t.Tolerance == 0 {
		t.Tolerance = 1e-10
	}
	if t.Iterations < 0 {
		return t, fmt.Errorf("fit: Iterations is %d; it must be positive, or 0 for the default", t.Iterations)
	}
	if t.Iterations == 0 {
		t.Iterations = 5000
	}
	if t.Reach == 0 {
		t.Reach = 1
	}
	if t.Restarts == 0 {
		t.Restarts = 24
	}
	if t.SlopeError == 0 {
		t.SlopeError = 1e-13
	}
	lower, upper := t.Lower, t.Upper
	t.Lower, t.Upper = make([]float64, n), make([]float64, n)
	for j := range n {
		t.Lower[j], t.Upper[j] = math.Inf(-1), math.Inf(1)
	}
	if lower != nil {
		if len(lower) != n {
			return t, fmt.Errorf("fit: %d lower bounds for %d parameters", len(lower), n)
		}
		copy(t.Lower, lower)
	}
	if upper != nil {
		if len(upper) != n {
			return t, fmt.Errorf("fit: %d upper bounds for %d parameters", len(upper), n)
		}
		copy(t.Upper, upper)
	}
	for j := range n {
		if !(t.Lower[j] <= t.Upper[j]) {
			return t, fmt.Errorf("fit: parameter %d has the lower bound %g and the upper bound %g; the lower one must not be larger", j, t.Lower[j], t.Upper[j])
		}
	}
	return t, nil
}

// A Status says why a search ended.
type Status int

const (
	// Converged: the minimum of the linearized problem is nearer than the tolerance.
	Converged Status = iota
	// ConvergedRounding: no step changes the answer by more than rounding.
	ConvergedRounding
	// ExactFit: all residuals are zero.
	ExactFit
	// IterationLimit: the iterations are used up.
	IterationLimit
	// Stalled: the slopes promise an improvement, but no step delivers it.
	Stalled
)

// String says the status in words.
func (s Status) String() string {
	switch s {
	case Converged:
		return "converged: the next step would be shorter than the tolerance"
	case ConvergedRounding:
		return "converged as far as rounding allows"
	case ExactFit:
		return "converged: every residual is zero"
	case IterationLimit:
		return "not converged: the iterations are used up"
	case Stalled:
		return "not converged: no step improves the fit, although its slopes promise one (slopes inaccurate, or a model with jumps)"
	}
	return fmt.Sprintf("status %d", int(s))
}

// Converged tells whether the search ended at a minimum.
func (s Status) Converged() bool {
	return s == Converged || s == ConvergedRounding || s == ExactFit
}

// A Result is the answer of LeastSquares.
type Result struct {
	Params    []float64
	Residuals []float64
	// Jacobian holds the slopes at Params, row-major, len(Residuals)×len(Params).
	Jacobian []float64
	// ChiSquare is the sum of the squared residuals, DegreesOfFreedom the
	// number of residuals less that of the free parameters.
	ChiSquare        float64
	DegreesOfFreedom int
	Status           Status
	// Offset is the distance left to the minimum of the linearized problem in
	// standard errors.
	Offset float64
	// Iterations counts the Jacobians of the search that gave the answer,
	// Evaluations all calls of the model in all searches, Searches the
	// searches.
	Iterations, Evaluations, Searches int
	// AtBound lists the parameters that stand at a bound and would leave it
	// outwards; Held those with equal bounds.
	AtBound, Held []int
	// Covariance of the parameters, row-major n×n. Rows of parameters in
	// AtBound and Held are zero; along directions that are undetermined the
	// smallest covariance that fits the rest is given. StandardErrors tells
	// these cases apart.
	Covariance []float64
	// Directions are those of parameter space that these data fix badly or not
	// at all, worst first.
	Directions []Direction
	// ErrorsKnown repeats the setting: the covariance is not scaled.
	ErrorsKnown bool

	undetermined []bool
}

// ReducedChiSquare is ChiSquare divided by DegreesOfFreedom, NaN where there
// are none.
func (r *Result) ReducedChiSquare() float64 {
	if r.DegreesOfFreedom <= 0 {
		return math.NaN()
	}
	return r.ChiSquare / float64(r.DegreesOfFreedom)
}

// LeastSquares finds params that minimize the sum of the squares of size
// residuals of the model, from start, by the Levenberg–Marquardt method in its
// trust-region form (J. J. Moré, in Numerical Analysis, LNM 630, Springer,
// 105 (1978)): the step p minimizes ‖r + Jp‖ within
// ‖Dp‖ ≤ Δ, with D the largest lengths of the columns of J met so far.
//
// Bounds act on the step itself (an active set: parameters that would pass
// their bound stop there and the others are solved for again), so slopes stay
// exact and a parameter can rest on its bound. A start outside the bounds is
// moved to the nearest one. The same input gives the same bits.
func LeastSquares(model Model, size int, start []float64, settings *Settings) (*Result, error) {
	n := len(start)
	set, err := settings.withDefaults(n)
	if err != nil {
		return nil, err
	}
	if size <= 0 {
		return nil, errors.New("fit: there are no residuals; a fit needs at least one data point")
	}
	begin := slices.Clone(start)
	for j, v := range begin {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("fit: the start of parameter %d is %g; it must be a finite number", j, v)
		}
		begin[j] = min(max(v, set.Lower[j]), set.Upper[j])
	}
	s := newSearch(model, size, begin, set)
	if err := s.run(begin, set.Reach); err != nil {
		return nil, err
	}
	if !s.started {
		return nil, fmt.Errorf("fit: at the start (%v) residual %d is %g or has slopes that are not finite; start where the model has a value", begin, s.badResidual, s.badValue)
	}
	best := s.answer()
	searches := 1
	if set.Restarts > 0 && n > 0 {
		for again := newRestarts(begin, set); searches <= set.Restarts && best.doubtful(begin, set.SlopeError); searches++ {
			at, reach := again.next()
			if err := s.run(at, reach); err != nil {
				return nil, err
			}
			if !s.started {
				continue
			}
			if other := s.answer(); other.better(best) {
				best = other
			}
		}
	}
	best.Searches, best.Evaluations = searches, s.evaluations
	best.ErrorsKnown = set.ErrorsKnown
	best.judge(set)
	return best, nil
}

// doubtful tells that a search should be tried in another way: it did not end
// at a minimum, or it ended on a plateau or on the way to infinity, where some
// direction moves nothing or the whole size of a parameter, now or at the
// start, less than a millionth of the scatter. Degeneracies that are true look
// like this too; they cost the restarts.
func (r *Result) doubtful(begin []float64, slopeError float64) bool {
	if r.Status == ExactFit {
		return false
	}
	if !r.Status.Converged() {
		return true
	}
	c := newCurvature(r.Jacobian, len(r.Residuals), len(r.Params), r.fixed())
	for b, j := range c.free {
		size := max(math.Abs(r.Params[j]), math.Abs(begin[j]))
		if c.lengths[b]*size < 1e-6*math.Sqrt(r.ReducedChiSquare()) {
			return true
		}
	}
	return slices.Contains(c.undetermined(max(slopeError, 1e-11)), true)
}

func (r *Result) better(than *Result) bool {
	if math.Abs(r.ChiSquare-than.ChiSquare) <= 1e-9*than.ChiSquare {
		return r.Status.Converged() && !than.Status.Converged()
	}
	return r.ChiSquare < than.ChiSquare
}

func (r *Result) fixed() []bool {
	fixed := make([]bool, len(r.Params))
	for _, j := range r.AtBound {
		fixed[j] = true
	}
	for _, j := range r.Held {
		fixed[j] = true
	}
	return fixed
}

// restarts lists where and how to search again: from the start with shorter
// and longer first steps, then from starts with the same signs and other sizes.
type restarts struct {
	begin    []float64
	set      Settings
	attempts int
}

func newRestarts(begin []float64, set Settings) *restarts {
	return &restarts{begin: begin, set: set}
}

func (r *restarts) next() ([]float64, float64) {
	k := r.attempts
	r.attempts++
	reaches := []float64{0.03, 100, 0.3}
	if k < len(reaches) {
		return r.begin, reaches[k] * r.set.Reach
	}
	k -= len(reaches)
	at := slices.Clone(r.begin)
	for j := range at {
		// Two decades down to one up, by a Halton sequence (J. H. Halton,
		// Numer. Math. 2, 84 (1960)).
		u := radicalInverse(k+1, prime(j))
		at[j] *= math.Pow(10, 3*u-2)
		at[j] = min(max(at[j], r.set.Lower[j]), r.set.Upper[j])
	}
	return at, r.set.Reach
}

// radicalInverse mirrors the digits of k in the given base at the point.
func radicalInverse(k, base int) float64 {
	value, digit := 0.0, 1/float64(base)
	for ; k > 0; k /= base {
		value += float64(k%base) * digit
		digit /= float64(base)
	}
	return value
}

// prime returns the j-th prime, counted from zero.
func prime(j int) int {
	for p := 2; ; p++ {
		divisible := false
		for d := 2; d*d <= p; d++ {
			divisible = divisible || p%d == 0
		}
		if !divisible {
			if j == 0 {
				return p
			}
			j--
		}
	}
}
