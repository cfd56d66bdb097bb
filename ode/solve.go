package ode

import (
	"context"
	"errors"
	"fmt"
	"math"
)

// Func sets dydt to the slope of y at t. It must neither keep nor change y. An
// error ends the solution.
type Func func(t float64, y, dydt []float64) error

// Settings of a Solver; zero values mean the defaults.
type Settings struct {
	// Accuracy bounds the Euclidean norm of the estimated error of one step, in
	// the units of y; default 1e-8. It is absolute.
	Accuracy float64
	// PerTime bounds the error of a step of size h by Accuracy·h/|t1 − t0|, so
	// that the errors of all steps sum to at most Accuracy. The true error at
	// the end is then no larger wherever solutions do not move apart, as far as
	// estimates hold.
	PerTime bool
	// FirstStep is the size of the first attempt; default: chosen from the slope.
	FirstStep float64
	// LargestStep bounds every step; default: none. Set it where f has features
	// that a long step from a quiet time could pass over.
	LargestStep float64
	// MostSteps bounds the number of attempts in one call of Solve; default 1e6.
	MostSteps int
	// Accept may refuse the state at the end of a step whose error is small
	// enough. The step is tried again at half the size. It must neither keep nor
	// change y.
	Accept func(t float64, y []float64) bool
}

// Stats counts what one call of Solve did.
type Stats struct {
	Steps    int // taken
	Rejected int // attempts with too large an error, or a state that is not finite
	Vetoed   int // attempts refused by Settings.Accept
	Calls    int // of f
	// Sizes of the first and last step and of the smallest one taken.
	First, Last, Smallest float64
}

// Reasons why Solve fails, to be found with errors.Is; all come in an *Error.
// Errors of f and emit and the cause of a cancelled context are wrapped as they
// are.
var (
	ErrSettings  = errors.New("settings out of range")
	ErrTimes     = errors.New("times must be finite and in order, all forward or all backward")
	ErrStepSize  = errors.New("the accuracy asked for needs steps smaller than rounding allows; ask for less, or look for a singularity")
	ErrSteps     = errors.New("step limit reached; raise MostSteps or ask for less accuracy")
	ErrNotFinite = errors.New("state or slope is not finite, however small the step")
	ErrVeto      = errors.New("every state was refused, however small the step")
)

// Error says how far Solve came: y holds the state at Time.
type Error struct {
	Time float64
	Step float64 // size of the step that was being tried, 0 before the first
	Err  error
}

func (e *Error) Error() string {
	return fmt.Sprintf("ode: at t = %g with step %g: %v", e.Time, e.Step, e.Err)
}

func (e *Error) Unwrap() error { return e.Err }

// Solver integrates dy/dt = f(t, y) for n numbers. It keeps its memory between
// calls of Solve and is for one goroutine at a time.
type Solver struct {
	tab *Tableau
	num *numbers
	set Settings

	t, ahead     float64   // ends of the step
	span         float64   // of the whole solution, with sign
	y, next, end []float64 // state, argument of a stage, state after the step
	out          []float64
	k, r         [][]float64 // slopes of the stages; dense output, see prepare
	prepared     bool
	control      control
	stats        Stats
}

// NewSolver returns a solver for n numbers with a method of Tableaux. Settings
// are checked by Solve.
func NewSolver(n int, tab *Tableau, s Settings) *Solver {
	if n < 0 {
		panic("ode: NewSolver needs n ≥ 0")
	}
	if s.Accuracy == 0 {
		s.Accuracy = 1e-8
	}
	if s.LargestStep == 0 {
		s.LargestStep = math.Inf(1)
	}
	if s.MostSteps == 0 {
		s.MostSteps = 1e6
	}
	num := tab.read()
	stages, dense := len(num.rows), 3+len(num.dense)
	memory := make([]float64, n*(4+stages+dense))
	cut := func() []float64 {
		x := memory[:n:n]
		memory = memory[n:]
		return x
	}
	w := &Solver{tab: tab, num: num, set: s, y: cut(), next: cut(), end: cut(), out: cut()}
	for range stages {
		w.k = append(w.k, cut())
	}
	for range dense {
		w.r = append(w.r, cut())
	}
	return w
}

// Solve integrates from y at t0 through the times, which run forward or backward
// from t0, and hands the state at each of them to emit (nil: to nobody), which
// must neither keep nor change it. The last time is the end of a step, those
// before are read off the dense output; f is not asked beyond the last time. At
// the end y is the state there. On failure the error is an *Error, and y is the
// last good state, the one at Error.Time: the end of the last step taken, or
// what emit was given when it failed.
//
// It panics if len(y) is not the n of NewSolver.
func (s *Solver) Solve(ctx context.Context, f Func, t0 float64, y []float64, times []float64, emit func(i int, t float64, y []float64) error) (Stats, error) {
	if len(y) != len(s.y) {
		panic("ode: Solve needs a y of the length given to NewSolver")
	}
	s.stats = Stats{}
	s.t = t0
	if err := s.check(t0, times); err != nil {
		return s.stats, &Error{t0, 0, err}
	}
	copy(s.y, y)
	err := s.play(ctx, f, times, emit)
	copy(y, s.y)
	return s.stats, err
}

func (s *Solver) check(t0 float64, times []float64) error {
	set := &s.set
	switch {
	case !(set.Accuracy > 0) || !finite(set.Accuracy):
		return fmt.Errorf("settings: Accuracy is %g, must be positive: %w", set.Accuracy, ErrSettings)
	case !(set.FirstStep >= 0) || !finite(set.FirstStep):
		return fmt.Errorf("settings: FirstStep is %g, must be a positive size: %w", set.FirstStep, ErrSettings)
	case !(set.LargestStep > 0):
		return fmt.Errorf("settings: LargestStep is %g, must be a positive size: %w", set.LargestStep, ErrSettings)
	case set.MostSteps < 0:
		return fmt.Errorf("settings: MostSteps is %d, must be positive: %w", set.MostSteps, ErrSettings)
	case !finite(t0):
		return fmt.Errorf("first time is %g: %w", t0, ErrTimes)
	}
	s.span = 0
	if len(times) > 0 {
		s.span = times[len(times)-1] - t0
	}
	for i, t := range times {
		if !finite(t) || !finite(t-t0) {
			return fmt.Errorf("times[%d] is %g after %g: %w", i, t, t0, ErrTimes)
		}
	}
	before := t0
	for i, t := range times {
		if t != before && (s.span == 0 || s.beyond(before, t)) {
			return fmt.Errorf("times[%d] is %g after %g, the last is %g: %w", i, t, before, t0+s.span, ErrTimes)
		}
		before = t
	}
	return nil
}

// beyond says whether a comes after b on the way.
func (s *Solver) beyond(a, b float64) bool { return a != b && a > b == (s.span > 0) }

// play takes steps until the last time.
func (s *Solver) play(ctx context.Context, f Func, times []float64, emit func(int, float64, []float64) error) error {
	if ctx.Err() != nil {
		return &Error{s.t, 0, context.Cause(ctx)}
	}
	for _, v := range s.y {
		if !finite(v) {
			return &Error{s.t, 0, ErrNotFinite}
		}
	}
	due := 0
	for ; due < len(times) && times[due] == s.t; due++ {
		if err := hand(emit, due, s.t, s.y); err != nil {
			return &Error{s.t, 0, err}
		}
	}
	if due == len(times) {
		return nil
	}
	h, err := s.begin(f)
	if err != nil {
		return &Error{s.t, 0, err}
	}
	last := times[len(times)-1]
	for attempts := 0; s.t != last; {
		var taken float64
		for taken == 0 {
			if ctx.Err() != nil {
				return &Error{s.t, h, context.Cause(ctx)}
			}
			if attempts == s.set.MostSteps {
				return &Error{s.t, h, ErrSteps}
			}
			attempts++
			if taken, h, err = s.attempt(f, last, h); err != nil {
				return &Error{s.t, h, err}
			}
		}
		s.prepared = false
		for ; due < len(times) && s.beyond(s.ahead, times[due]); due++ {
			if emit == nil {
				continue
			}
			if err := s.prepare(f, taken); err != nil {
				return &Error{s.t, math.Abs(taken), err}
			}
			s.within((times[due] - s.t) / taken)
			if !allFinite(s.out) {
				return &Error{s.t, math.Abs(taken), ErrNotFinite}
			}
			if err := emit(due, times[due], s.out); err != nil {
				copy(s.y, s.out)
				return &Error{times[due], math.Abs(taken), err}
			}
		}
		s.advance(taken)
		for ; due < len(times) && times[due] == s.t; due++ {
			if err := hand(emit, due, s.t, s.y); err != nil {
				return &Error{s.t, math.Abs(taken), err}
			}
		}
	}
	return nil
}

func hand(emit func(int, float64, []float64) error, i int, t float64, y []float64) error {
	if emit == nil {
		return nil
	}
	return emit(i, t, y)
}

// begin evaluates the first slope and chooses the size of the first step.
func (s *Solver) begin(f Func) (float64, error) {
	s.control = control{before: least}
	if err := s.call(f, s.t, s.y, s.k[0]); err != nil {
		return 0, err
	}
	if !allFinite(s.k[0]) {
		return 0, ErrNotFinite
	}
	return s.firstStep(f)
}

// attempt tries a step of about the size h towards the last time. It returns the
// step taken, with sign, or 0, and the size to try next. The state after the
// step is in s.end, s.t and s.y stay.
func (s *Solver) attempt(f Func, last, h float64) (taken, then float64, err error) {
	left := math.Abs(last - s.t)
	size := math.Max(math.Min(h, s.set.LargestStep), s.smallest())
	// What is left is one step, or two that are equal so that none is tiny.
	switch {
	case left <= size*(1+1e-9):
		size = left
	case left < 2*size:
		size = left / 2
	}
	s.ahead = s.t + math.Copysign(size, s.span)
	if size == left {
		s.ahead = last
	}
	step := s.ahead - s.t
	if err := s.stages(f, 1, s.tab.Stages, step); err != nil {
		return 0, size, err
	}
	factor, reason := s.judge(step)
	if reason == nil {
		copy(s.end, s.next)
		return step, math.Min(size*factor, s.set.LargestStep), nil
	}
	if reason == ErrVeto {
		s.stats.Vetoed++
	} else {
		s.stats.Rejected++
	}
	if size *= factor; size < s.smallest() {
		return 0, size, reason
	}
	return 0, size, nil
}

// judge returns the factor to the size of the next attempt, and why a step may
// not be taken.
func (s *Solver) judge(step float64) (factor float64, reason error) {
	if !allFinite(s.next) || !allFinite(s.k[s.tab.Stages-1]) {
		s.control.refused = true
		return tenth, ErrNotFinite
	}
	bound, power := s.allowed(step)
	e := s.estimate(step) / bound
	switch {
	case !finite(e):
		s.control.refused = true
		return shrink, ErrStepSize
	case e > 1:
		return s.control.missed(e, power), ErrStepSize
	case s.set.Accept != nil && !s.set.Accept(s.ahead, s.next):
		s.control.refused = true
		return halve, ErrVeto
	}
	return s.control.taken(e, power), nil
}

// advance makes the end of the step the state.
func (s *Solver) advance(step float64) {
	s.t = s.ahead
	s.y, s.end = s.end, s.y
	last := s.tab.Stages - 1
	s.k[0], s.k[last] = s.k[last], s.k[0]
	size := math.Abs(step)
	if s.stats.Steps == 0 {
		s.stats.First, s.stats.Smallest = size, size
	}
	s.stats.Steps++
	s.stats.Last = size
	s.stats.Smallest = math.Min(s.stats.Smallest, size)
}

func allFinite(x []float64) bool {
	for _, v := range x {
		if !finite(v) {
			return false
		}
	}
	return true
}
