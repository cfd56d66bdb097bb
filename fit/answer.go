package fit

import (
	"context"
	"fmt"
	"math"
	"slices"
	"sort"

	"rhotrace/experiment"
	"rhotrace/io/table"
)

// TraceSettings say how traces are fitted; the zero value is the default.
type TraceSettings struct {
	Workers int // goroutines; default (0): one for each processor
	// Progress is told now and then how many places of the search have been
	// looked at; default: nobody is told.
	Progress func(done, total int)
}

// Answer is what measured traces say about the unknowns of an experiment.
type Answer struct {
	Unknowns         []Unknown
	Correlation      [][]float64 // NaN where a number has no error
	ReducedChiSquare float64     // NaN without degrees of freedom
	DegreesOfFreedom int
	ErrorsKnown      bool     // the data came with errors; else they were scaled by the residuals
	Weighting        []string // of each trace, in words
	Remarks          []string // how the traces were read
	Warnings         []string // doubts, in words
	Fitted           *experiment.Experiment
	Traces           []Fitted
}

// Unknown is one number found. All values are in SI units.
type Unknown struct {
	Name, Dial, Unit string
	Value            float64 // where the data leave a lifetime open: the far end of the search, a warning says so
	Error            float64 // standard error; NaN at a bound, +Inf where the data leave it open
	Low, High        float64 // 68 % interval: the value and its error, cut at the bounds; High +Inf where it is open
	dial             experiment.Dial
}

// Format writes a value of the unknown with a unit for people.
func (u *Unknown) Format(v float64) string { return u.dial.Format(v) }

// Fitted is one trace with its model.
type Fitted struct {
	Name     string
	X        []float64 // what is scanned first, or time
	Dials    []string
	Points   [][]float64
	Data     []float64
	Error    []float64
	Model    []float64
	Residual []float64 // data − model

	e             *experiment.Experiment // with this trace's own values
	shows         string
	scale, offset float64
}

// Curve is the model on n points evenly spaced over what the trace scans; nil
// where it scans several dials together.
func (f *Fitted) Curve(ctx context.Context, n int) (x, y []float64, err error) {
	if len(f.X) < 2 || len(f.Dials) > 1 {
		return nil, nil, nil
	}
	low, high := slices.Min(f.X), slices.Max(f.X)
	if !(high > low) {
		return nil, nil, nil
	}
	x = even(low, high, n)
	r := experiment.Request{Dials: f.Dials, Shows: f.shows}
	if len(f.Dials) == 0 {
		r.Times = x
	}
	for _, v := range x {
		if len(f.Dials) == 1 {
			r.Points = append(r.Points, []float64{v})
		}
	}
	p, err := experiment.NewPredictor(f.e, r)
	if err != nil {
		return nil, nil, err
	}
	y = make([]float64, n)
	if err := p.Evaluate(ctx, nil, y, nil); err != nil {
		return nil, nil, err
	}
	for i := range y {
		y[i] = f.offset + f.scale*y[i]
	}
	return x, y, nil
}

// Traces fits the unknowns of the experiment to measured traces, all at once,
// by weighted nonlinear least squares with exact slopes. A trace is modelled as
// offset + scale × prediction. Weights: the errors of the file, else binomial or
// Poisson errors from the shots, taken from the model and iterated; else equal
// ones whose size the residuals give. Searches begin where scans of each
// unknown leave least, so that a fringe of unknown frequency is found: within
// low and high of the unknown, else up to half the rate at which the traces
// sample it.
func Traces(ctx context.Context, e *experiment.Experiment, traces []*experiment.Trace, set TraceSettings) (*Answer, error) {
	p, err := newProblem(ctx, e, traces, set.Workers)
	if err != nil {
		return nil, err
	}
	p.progress = set.Progress
	if p.rows < 1 {
		return nil, fmt.Errorf("%s: the traces hold no points", e.File())
	}
	best, others, err := p.solve()
	if err != nil {
		return nil, err
	}
	return p.answer(best, others)
}

// solve searches from every start and refines the best answer with errors
// from the model. others are different answers that fit too.
func (p *problem) solve() (best *Result, others []*Result, err error) {
	if err := p.balance(); err != nil {
		return nil, nil, err
	}
	starts, err := p.starts()
	if err != nil {
		return nil, nil, err
	}
	quick := p.bounded()
	quick.Tolerance, quick.Iterations, quick.Restarts = 1e-2, 40, -1
	p.use(rough)
	var all []*Result
	var failed error
	for _, s := range starts {
		r, err := LeastSquares(p.model, p.rows, s.params, quick)
		if err != nil {
			if p.ctx.Err() != nil {
				return nil, nil, p.ctx.Err()
			}
			failed = err
			continue
		}
		all = append(all, r)
		if best == nil || r.ChiSquare < best.ChiSquare {
			best = r
		}
	}
	if best == nil {
		return nil, nil, fmt.Errorf("%s: no search for the unknowns came to an end; check their start values and bounds: %w", p.e.File(), failed)
	}
	if p.aliased(best.Params) { // unless it is clearly better, one below half the sampling rate
		least := best.ChiSquare + 9*p.unit(best)
		for _, r := range all {
			if r.ChiSquare <= least && !p.aliased(r.Params) {
				best, least = r, r.ChiSquare
			}
		}
	}
others:
	for _, r := range all {
		if r.ChiSquare > best.ChiSquare+9*p.unit(best) {
			continue
		}
		for _, known := range append([]*Result{best}, others...) {
			if !p.different(r.Params, known) {
				continue others
			}
		}
		others = append(others, r)
	}
	if len(others) > 2 {
		sort.SliceStable(others, func(i, j int) bool { return others[i].ChiSquare < others[j].ChiSquare })
		others = others[:2]
	}
	p.use(exact)
	fine := p.bounded()
	fine.Tolerance, fine.Iterations, fine.Restarts = 1e-5, 300, 2
	for pass := range 3 {
		for _, m := range p.traces {
			if err := m.predict(p.ctx, best.Params, false); err != nil {
				return nil, nil, err
			}
			m.modelErrors(best.Params)
			p.residualErrors(m, best.Params)
		}
		next, err := LeastSquares(p.model, p.rows, best.Params, fine)
		if err != nil {
			return nil, nil, err
		}
		best = next
		if pass == 0 && !p.counts() && len(p.traces) == 1 {
			break
		}
	}
	return best, others, nil
}

// bounded are the settings for this problem.
func (p *problem) bounded() *Settings {
	s := &Settings{ErrorsKnown: p.errorsKnown(), SlopeError: 1e-9}
	for _, u := range p.params {
		s.Lower, s.Upper = append(s.Lower, u.low), append(s.Upper, u.high)
	}
	return s
}

// unit is what one standard error adds to the sum of squares; more than the
// errors say where the residuals are larger.
func (p *problem) unit(r *Result) float64 {
	switch {
	case r.DegreesOfFreedom < 1:
		return 1
	case r.ErrorsKnown:
		return math.Max(1, r.ReducedChiSquare())
	}
	return r.ReducedChiSquare()
}

// aliased tells that a frequency lies above half the rate at which the traces
// sample it.
func (p *problem) aliased(params []float64) bool {
	for i, v := range params {
		if w := p.window(i); p.oscillates(i, w.unit) && math.Abs(v) > 0.5/w.step {
			return true
		}
	}
	return false
}

func (p *problem) errorsKnown() bool {
	for _, m := range p.traces {
		if m.known {
			return true
		}
	}
	return false
}

func (p *problem) counts() bool {
	for _, m := range p.traces {
		if m.known && m.trace.Error == nil {
			return true
		}
	}
	return false
}

// balance gives traces without errors an estimate of their scatter, so that
// several traces weigh as they should; one trace alone needs none.
func (p *problem) balance() error {
	if len(p.traces) == 1 {
		return nil
	}
	for _, m := range p.traces {
		if m.known {
			continue
		}
		x, _ := m.axis()
		s := Scatter(x, m.y)
		if !(s > 0) {
			s = math.Max(spreadOf(m.y)*1e-3, 1e-300)
		}
		for i := range m.sigma {
			m.sigma[i] = s
		}
	}
	return nil
}

// residualErrors takes the scatter of one of several traces without errors from
// its own residuals, so that each trace weighs by its own.
func (p *problem) residualErrors(m *measured, params []float64) {
	if m.known || len(p.traces) == 1 {
		return
	}
	square, n := 0.0, float64(len(m.y))
	scale, offset := m.scale.at(params), m.offset.at(params)
	for i, y := range m.y {
		r := offset + scale*m.pred[i] - y
		square += r * r
	}
	left := n // degrees of freedom; a shared unknown takes from each trace its share
	for i, u := range p.params {
		switch {
		case u.trace < 0 && !p.isFactor(i):
			left -= n / float64(p.rows)
		case u.trace >= 0 && p.traces[u.trace] == m, m.scale.param == i, m.offset.param == i:
			left--
		}
	}
	// Never far below what neighbours differ by: a few points can be hit exactly.
	x, _ := m.axis()
	least := 0.1 * Scatter(x, m.y)
	if s := math.Max(least, math.Sqrt(square/math.Max(left, 1))); s > 0 && left > 0 {
		for i := range m.sigma {
			m.sigma[i] = s
		}
	}
}

func spreadOf(y []float64) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, v := range y {
		low, high = math.Min(low, v), math.Max(high, v)
	}
	return high - low
}

// different reports whether an answer is another place, not the same one
// within its errors.
func (p *problem) different(params []float64, best *Result) bool {
	se := best.StandardErrors()
	for i := range params {
		// A phase may differ by half a turn when a scale changes sign.
		if p.isFactor(i) || p.params[i].dial.Unit == "rad" || !(se[i] > 0) || math.IsInf(se[i], 0) {
			continue
		}
		if math.Abs(params[i]-best.Params[i]) > 5*se[i] {
			return true
		}
	}
	return false
}

// answer puts the result into words and tables.
func (p *problem) answer(r *Result, others []*Result) (*Answer, error) {
	a := &Answer{ReducedChiSquare: r.ReducedChiSquare(), DegreesOfFreedom: r.DegreesOfFreedom, ErrorsKnown: r.ErrorsKnown}
	se := r.StandardErrors()
	n := len(p.params)
	c := r.Correlation()
	for i, u := range p.params {
		q := r.Params[i]
		v := u.scale.value(q)
		x := Unknown{Name: u.name, Dial: u.dial.Path, Unit: u.dial.Unit, Value: v, Error: se[i] * math.Abs(u.scale.slope(q)), dial: u.dial}
		a1, b1 := u.scale.value(math.Max(u.low, q-se[i])), u.scale.value(math.Min(u.high, q+se[i]))
		x.Low, x.High = math.Min(a1, b1), math.Max(a1, b1)
		if math.IsNaN(se[i]) {
			x.Low, x.High = v, v
			if limit, open := p.limit(r, i, 1); open {
				x.Low, x.High = math.Min(v, limit), math.Max(v, limit)
			}
		}
		if u.cut && q-se[i] < u.low || u.cut && x.Low < x.High && q == u.low { // as far as one likes
			if u.scale == rateScale {
				x.High = math.Inf(1)
			} else {
				x.Low = 0
			}
		}
		a.Unknowns = append(a.Unknowns, x)
		row := append([]float64(nil), c[i*n:(i+1)*n]...)
		for j := range row { // a rate falls as its lifetime grows
			if (u.scale == rateScale) != (p.params[j].scale == rateScale) {
				row[j] = -row[j]
			}
		}
		a.Correlation = append(a.Correlation, row)
	}
	if err := p.fitted(a, r); err != nil {
		return nil, err
	}
	for _, m := range p.traces {
		if err := m.predict(p.ctx, r.Params, false); err != nil {
			return nil, err
		}
		scale, offset := m.scale.at(r.Params), m.offset.at(r.Params)
		x, _ := m.axis()
		own, err := p.ownValues(m, r)
		if err != nil {
			return nil, err
		}
		f := Fitted{Name: m.trace.Name, e: own, shows: m.trace.Shows, scale: scale, offset: offset, X: x, Dials: m.trace.Dials, Points: m.trace.Points, Data: m.y}
		for i, y := range m.y {
			model := offset + scale*m.pred[i]
			s := m.sigma[i]
			if !r.ErrorsKnown {
				s *= math.Sqrt(math.Max(0, a.ReducedChiSquare))
			}
			f.Error, f.Model, f.Residual = append(f.Error, s), append(f.Model, model), append(f.Residual, y-model)
		}
		a.Traces = append(a.Traces, f)
		a.Weighting = append(a.Weighting, m.weighting)
		for _, remark := range m.trace.Remarks {
			a.Remarks = append(a.Remarks, m.trace.Name+": "+remark)
		}
	}
	p.doubts(a, r, others)
	return a, nil
}

// fitted is the experiment with the values found; those of single traces are
// left out where the file has one dial for all.
func (p *problem) fitted(a *Answer, r *Result) (err error) {
	var turns []experiment.Turn
	values := map[string]int{}
	for _, u := range p.params {
		values[u.dial.Path]++
	}
	for i, u := range p.params {
		if values[u.dial.Path] == 1 {
			turns = append(turns, experiment.Turn{Path: u.dial.Path, Value: u.scale.value(r.Params[i])})
		}
	}
	a.Fitted, err = p.e.With(turns...)
	return err
}

// ownValues is the experiment as a trace saw it.
func (p *problem) ownValues(m *measured, r *Result) (*experiment.Experiment, error) {
	turns := append([]experiment.Turn(nil), m.trace.At...)
	for _, i := range m.free {
		turns = append(turns, experiment.Turn{Path: p.params[i].dial.Path, Value: p.params[i].scale.value(r.Params[i])})
	}
	return p.e.With(turns...)
}

// Table has the data, the model and the residuals of all traces, one row per
// point; with several traces a column tells them apart.
func (a *Answer) Table() *table.Table {
	t := &table.Table{Meta: map[string]string{table.MetaExperiment: string(a.Fitted.Text()), table.MetaVersion: experiment.Version}, Warnings: a.Warnings}
	dials := map[string]bool{}
	var order []string
	for _, f := range a.Traces {
		names := f.Dials
		if len(names) == 0 {
			names = []string{"time"}
		}
		for _, d := range names {
			if !dials[d] {
				dials[d] = true
				order = append(order, d)
			}
		}
	}
	if len(a.Traces) > 1 {
		a.column(t, "trace", "1", "number of the trace, from 1", func(k, _ int) float64 { return float64(k + 1) })
	}
	for _, d := range order {
		unit, about := "s", "time since the start of the record"
		if dial, err := a.Fitted.Dial(d); err == nil {
			unit, about = dial.Unit, dial.Doc
		}
		a.column(t, d, unit, about, func(k, i int) float64 { return a.Traces[k].at(d, i) })
	}
	a.column(t, "data", "1", "measured", func(k, i int) float64 { return a.Traces[k].Data[i] })
	a.column(t, "data.error", "1", "standard error of the measured value", func(k, i int) float64 { return a.Traces[k].Error[i] })
	a.column(t, "model", "1", "fitted", func(k, i int) float64 { return a.Traces[k].Model[i] })
	a.column(t, "residual", "1", "measured less fitted", func(k, i int) float64 { return a.Traces[k].Residual[i] })
	return t
}

func (a *Answer) column(t *table.Table, name, unit, about string, value func(trace, row int) float64) {
	var v []float64
	for k := range a.Traces {
		for i := range a.Traces[k].Data {
			v = append(v, value(k, i))
		}
	}
	t.Add(name, unit, about, v)
}

func (f *Fitted) at(dial string, i int) float64 {
	if len(f.Dials) == 0 && dial == "time" {
		return f.X[i]
	}
	for j, d := range f.Dials {
		if d == dial {
			return f.Points[i][j]
		}
	}
	return math.NaN()
}
