package experiment

import (
	"context"
	"fmt"
	"runtime"
	"strings"
	"sync"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/io/quantity"
	"rhotrace/lindblad"
)

// Request says what a Predictor evaluates.
type Request struct {
	Dials  []string    // paths of the dials that the points give values
	Points [][]float64 // one row per answer, SI; the scans of the file do not apply
	Times  []float64   // recorded times (s) in place of points, not decreasing
	Shows  string      // column: "signal" (the default), "population.e", "coherence.g:e.re"
	Free   []string    // dials with respect to which slopes are wanted
	// Accuracy replaces the experiment's; default (0): that of the file.
	Accuracy float64
	// Central leaves the spreads out: every shot is the central one.
	Central bool
	// Workers is the number of goroutines; default (0): one for each processor.
	Workers int
}

// Predictor evaluates one column of an experiment again and again for other
// values of the free dials, with exact slopes. It belongs to one goroutine.
type Predictor struct {
	e       *Experiment
	column  column
	request Request
	dials   []field
	free    []field
	layout  *layout
	cuts    [][2]int // points that are run together
	step    int      // the step whose duration they differ in
	workers []*evaluator
	base    []float64
}

// column is a column of the table that depends on the state.
type column struct {
	signal     bool
	population int // level, −1
	pair       [2]int
	imaginary  bool
}

// NewPredictor prepares the evaluation of a request.
func NewPredictor(e *Experiment, r Request) (*Predictor, error) {
	p := &Predictor{e: e, request: r, base: append([]float64(nil), e.values...)}
	if r.Shows == "" {
		p.request.Shows = "signal"
	}
	var err error
	if p.column, err = e.column(p.request.Shows); err != nil {
		return nil, err
	}
	if p.dials, err = e.fields(r.Dials); err != nil {
		return nil, err
	}
	if p.free, err = e.fields(r.Free); err != nil {
		return nil, err
	}
	for _, f := range p.free {
		if e.shape.dials[f].Whole {
			return nil, fmt.Errorf("%s takes whole numbers, so nothing has a slope along it", e.shape.dials[f].Path)
		}
	}
	for i, row := range r.Points {
		if len(row) != len(r.Dials) {
			return nil, fmt.Errorf("point %d has %d values for %d dials", i+1, len(row), len(r.Dials))
		}
	}
	var pairs [][2]int
	if !p.column.signal && p.column.population < 0 {
		pairs = [][2]int{p.column.pair}
	}
	if p.layout, err = newLayout(e, p.free, pairs); err != nil {
		return nil, err
	}
	if r.Accuracy > 0 {
		p.layout.accuracy = r.Accuracy
	}
	p.layout.central = r.Central
	column := -1
	if p.step = -1; len(p.dials) > 0 {
		column = len(p.dials) - 1
		p.step = e.lineStep(p.dials[column])
	}
	if p.step < 0 || contains(p.free, p.dials[column]) {
		column = -1
	}
	p.cuts = lines(r.Points, column)
	workers := r.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	if len(r.Times) > 0 {
		workers = 1
	}
	for range max(1, min(workers, len(p.cuts))) {
		p.workers = append(p.workers, p.layout.newEvaluator())
	}
	return p, nil
}

func (e *Experiment) fields(paths []string) ([]field, error) {
	var list []field
	for _, path := range paths {
		i, err := e.lookup(path)
		if err != nil {
			return nil, err
		}
		list = append(list, field(i))
	}
	return list, nil
}

// column finds a column that depends on the state by its name.
func (e *Experiment) column(name string) (column, error) {
	c := column{population: -1}
	s := e.shape
	level := func(name string) int {
		for i, l := range s.levels {
			if l == name {
				return i
			}
		}
		return -1
	}
	if name == "signal" && s.readout != nil {
		c.signal = true
		return c, nil
	}
	if rest, ok := strings.CutPrefix(bare(name), "population."); ok {
		if c.population = level(rest); c.population >= 0 {
			return c, nil
		}
	}
	if rest, ok := strings.CutPrefix(bare(name), "coherence."); ok {
		pair, part, _ := cutLast(rest, ".")
		a, b, _ := strings.Cut(pair, ":")
		c.pair, c.imaginary = [2]int{level(a), level(b)}, part == "im"
		if c.pair[0] >= 0 && c.pair[1] >= 0 && (part == "re" || part == "im") {
			return c, nil
		}
	}
	known := []string{}
	if s.readout != nil {
		known = append(known, "signal")
	}
	for _, l := range s.levels {
		known = append(known, "population."+l)
	}
	return c, fmt.Errorf("there is no column %q that depends on the state%s", name, didYouMean(name, known))
}

func (e *Experiment) checkColumn(name string) error {
	_, err := e.column(name)
	return err
}

func cutLast(s, sep string) (before, after string, found bool) {
	if i := strings.LastIndex(s, sep); i >= 0 {
		return s[:i], s[i+len(sep):], true
	}
	return s, "", false
}

// Rows is the number of answers of Evaluate.
func (p *Predictor) Rows() int {
	if len(p.request.Times) > 0 {
		return len(p.request.Times)
	}
	return len(p.request.Points)
}

// Evaluate computes the column at every point for the given values of the free
// dials (SI). y has one entry per row; dy[j] (nil: not wanted) the slopes along
// free dial j. A value out of a dial's range is an error.
func (p *Predictor) Evaluate(ctx context.Context, free []float64, y []float64, dy [][]float64) error {
	if len(free) != len(p.free) || len(y) != p.Rows() {
		panic("experiment: Evaluate with slices of the wrong length")
	}
	for j, f := range p.free {
		d := &p.e.shape.dials[f]
		if wrong := d.check(free[j]); wrong != "" {
			return fmt.Errorf("%s: %s %s", p.e.shape.file, d.Path, wrong)
		}
		p.base[f] = free[j]
	}
	for _, v := range p.workers {
		v.directions = p.free
		if dy == nil {
			v.directions = nil
		}
	}
	if len(p.request.Times) > 0 {
		return p.recorded(ctx, y, dy)
	}
	errs := make([]error, len(p.workers))
	var wait sync.WaitGroup
	for w, v := range p.workers {
		wait.Add(1)
		go func() {
			defer wait.Done()
			values := append([]float64(nil), p.base...)
			for c := w; c < len(p.cuts) && errs[w] == nil; c += len(p.workers) {
				errs[w] = p.rows(ctx, v, values, p.cuts[c], y, dy)
			}
		}()
	}
	wait.Wait()
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

func contains(list []field, f field) bool {
	for _, g := range list {
		if g == f {
			return true
		}
	}
	return false
}

// rows evaluates the points of one cut.
func (p *Predictor) rows(ctx context.Context, v *evaluator, values []float64, cut [2]int, y []float64, dy [][]float64) error {
	set := func(i int) {
		for k, f := range p.dials {
			values[f] = p.request.Points[i][k]
		}
	}
	set(cut[0])
	var st *states
	var err error
	if n := cut[1] - cut[0]; n == 1 {
		st, err = v.point(ctx, values, lindblad.Record{During: -1}, 1)
	} else {
		durations := make([]float64, n)
		for i := range durations {
			durations[i] = p.request.Points[cut[0]+i][len(p.dials)-1]
		}
		st, err = v.runLine(ctx, values, p.step, durations)
	}
	for i := cut[0]; i < cut[1] && err == nil; i++ {
		set(i)
		err = p.read(v, values, st, i-cut[0], i, y, dy)
	}
	return err
}

// recorded evaluates the answers at recorded times.
func (p *Predictor) recorded(ctx context.Context, y []float64, dy [][]float64) error {
	v := p.workers[0]
	rec := lindblad.Record{During: p.e.shape.record.during, Times: p.request.Times}
	st, err := v.point(ctx, p.base, rec, len(p.request.Times))
	if err != nil {
		return err
	}
	if last := p.request.Times[len(p.request.Times)-1]; last > st.lasts*(1+1e-12) {
		return &Error{File: p.e.shape.file, Path: "record", What: fmt.Sprintf("the trace goes on to %s, but the record ends after %s; let the steps last longer",
			quantity.Format(last, quantity.Time), quantity.Format(st.lasts, quantity.Time))}
	}
	for k := range p.request.Times {
		if err := p.read(v, p.base, st, k, k, y, dy); err != nil {
			return err
		}
	}
	return nil
}

// read takes the column of sample k of a point into row i.
func (p *Predictor) read(v *evaluator, values []float64, st *states, k, i int, y []float64, dy [][]float64) error {
	for j := -1; j < len(dy); j++ {
		direction, slope := none, []float64(nil)
		if j >= 0 {
			direction, slope = p.free[j], st.slopes[j][k]
		}
		if err := v.settler.settle(values, direction, nil); err != nil {
			return v.place(err)
		}
		answer := p.take(v, st.values[k], slope)
		if j >= 0 {
			dy[j][i] = answer.Emag
		} else {
			y[i] = answer.Real
		}
	}
	return nil
}

func (p *Predictor) take(v *evaluator, state, slope []float64) dual.Number {
	of := v.averagesOf(state, slope)
	switch c := p.column; {
	case c.signal:
		return p.e.shape.readout.signal(v.settler.x, of)
	case c.population >= 0:
		return of.population(c.population)
	default:
		re, im := of.coherence(c.pair[0], c.pair[1])
		if c.imaginary {
			return im
		}
		return re
	}
}
