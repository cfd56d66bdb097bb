package fit

import (
	"context"
	"fmt"
	"math"
	"sort"
	"strings"

	"rhotrace/experiment"
)

// parameter is one number that a fit turns: an unknown, or its value for one
// trace. start, low and high are in the scale of the search, see scale.go.
type parameter struct {
	name      string
	dial      experiment.Dial
	trace     int // −1: of all traces
	start     float64
	low, high float64
	scale     searchScale
	cut       bool // the search ends at low, the unknown does not
}

// measured is one trace with what predicts it.
type measured struct {
	trace     *experiment.Trace
	predictor *experiment.Predictor // the one in use: exact, rough or central
	exact     *experiment.Predictor
	rough     *experiment.Predictor // to an accuracy that a search needs
	central   *experiment.Predictor // rough, without spreads: where they only damp a fringe
	free      []int                 // parameters that are free dials of the predictor, in its order
	scale     factor
	offset    factor
	y         []float64
	sigma     []float64
	known     bool // sigma is known, not estimated from the scatter
	weighting string
	from      int    // first row among all residuals
	unit      string // of what is scanned first

	scales []searchScale // of the free parameters
	values []float64
	pred   []float64
	slopes [][]float64
}

// factor is a constant or a parameter.
type factor struct {
	param int // −1: constant
	value float64
}

func (f factor) at(params []float64) float64 {
	if f.param >= 0 {
		return params[f.param]
	}
	return f.value
}

// problem is all traces with all parameters.
type problem struct {
	ctx    context.Context
	e      *experiment.Experiment
	params []parameter
	traces []*measured
	rows   int

	progress    func(done, total int)
	done, total int
}

func newProblem(ctx context.Context, e *experiment.Experiment, traces []*experiment.Trace, workers int) (*problem, error) {
	p := &problem{ctx: ctx, e: e}
	unknowns := e.Unknowns()
	if len(unknowns) == 0 {
		return nil, &experiment.Error{File: e.File(), Path: "unknown", What: "there is nothing to fit; add [unknown.NAME] with dial = \"…\" for each dial that is not known"}
	}
	if len(traces) == 0 {
		return nil, &experiment.Error{File: e.File(), Path: "trace", What: "there is no measured trace; name a file behind the experiment, or in [trace.NAME]"}
	}
	owners := map[string]int{} // dials of scale and offset → trace
	for t, tr := range traces {
		if tr.Scale != "" {
			if _, shared := owners[tr.Scale]; shared {
				owners[tr.Scale], owners[tr.Offset] = -1, -1 // several files by one description
			} else {
				owners[tr.Scale], owners[tr.Offset] = t, t
			}
		}
	}
	for _, u := range unknowns {
		if err := p.add(u, traces, owners); err != nil {
			return nil, err
		}
	}
	for t, tr := range traces {
		if err := p.measure(t, tr, workers); err != nil {
			return nil, err
		}
	}
	p.rescale()
	return p, nil
}

// add makes the parameter or parameters of an unknown.
func (p *problem) add(u experiment.Unknown, traces []*experiment.Trace, owners map[string]int) error {
	one := parameter{name: u.Name, dial: u.Dial, trace: -1, start: u.Value, low: u.Low, high: u.High}
	if owner, isFactor := owners[u.Dial.Path]; !isFactor && strings.HasPrefix(u.Dial.Path, "trace.") {
		return &experiment.Error{File: p.e.File(), Path: "unknown." + u.Name, What: u.Dial.Path + " belongs to a trace that is not fitted now; name its file or take the unknown out"}
	} else if isFactor && owner >= 0 {
		one.trace = owner
	}
	for _, tr := range traces {
		for _, path := range tr.Dials {
			if path == u.Dial.Path {
				return &experiment.Error{File: p.e.File(), Path: "unknown." + u.Name, What: fmt.Sprintf("%s is what trace %s scans, so it cannot be unknown; for an unknown shift of the axis use a [dial] of weight one that turns it", path, tr.Name)}
			}
		}
		for _, turn := range tr.At {
			if turn.Path == u.Dial.Path {
				return &experiment.Error{File: p.e.File(), Path: "unknown." + u.Name, What: fmt.Sprintf("%s is fixed by at in trace %s, so it cannot be unknown too", turn.Path, tr.Name)}
			}
		}
	}
	if !u.PerTrace || one.trace >= 0 {
		p.params = append(p.params, one)
		return nil
	}
	for t, tr := range traces {
		each := one
		each.trace = t
		if len(traces) > 1 {
			each.name = fmt.Sprintf("%s[%s]", u.Name, tr.Name)
		}
		p.params = append(p.params, each)
	}
	return nil
}

// measure prepares one trace.
func (p *problem) measure(t int, tr *experiment.Trace, workers int) error {
	tr = byTime(tr)
	e, err := p.e.With(tr.At...)
	if err != nil {
		return err
	}
	m := &measured{trace: tr, y: append([]float64(nil), tr.Y...), scale: factor{-1, 1}, offset: factor{-1, 0}, from: p.rows}
	for path, f := range map[string]*factor{tr.Scale: &m.scale, tr.Offset: &m.offset} {
		if path != "" {
			if f.value, err = e.Value(path); err != nil {
				return err
			}
		}
	}
	var free []string
	for i, u := range p.params {
		switch {
		case u.trace >= 0 && u.trace != t:
		case u.dial.Path == tr.Scale:
			m.scale.param = i
		case u.dial.Path == tr.Offset:
			m.offset.param = i
		case strings.HasPrefix(u.dial.Path, "trace."):
		default:
			free = append(free, u.dial.Path)
			m.free = append(m.free, i)
		}
	}
	request := experiment.Request{Dials: tr.Dials, Points: tr.Points, Times: tr.Times, Shows: tr.Shows, Free: free, Workers: workers}
	for _, q := range []struct {
		to       **experiment.Predictor
		accuracy float64
		central  bool
	}{{&m.exact, 0, false}, {&m.rough, 1e-4, false}, {&m.central, 1e-4, true}} {
		request.Accuracy, request.Central = q.accuracy, q.central
		if *q.to, err = experiment.NewPredictor(e, request); err != nil {
			return err
		}
	}
	m.predictor = m.exact
	if len(tr.Dials) > 0 {
		d, err := e.Dial(tr.Dials[0])
		if err != nil {
			return err
		}
		m.unit = d.Unit
	}
	n := len(m.y)
	m.values, m.pred = make([]float64, len(m.free)), make([]float64, n)
	for range m.free {
		m.slopes = append(m.slopes, make([]float64, n))
	}
	if err := m.firstErrors(); err != nil {
		return err
	}
	p.traces = append(p.traces, m)
	p.rows += n
	return nil
}

// byTime returns a recorded trace with its rows in the order of time, as the
// engine wants them; other traces as they are.
func byTime(tr *experiment.Trace) *experiment.Trace {
	if tr.Times == nil || sort.Float64sAreSorted(tr.Times) {
		return tr
	}
	order := make([]int, len(tr.Times))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return tr.Times[order[i]] < tr.Times[order[j]] })
	pick := func(c []float64) []float64 {
		if c == nil {
			return nil
		}
		out := make([]float64, len(order))
		for i, k := range order {
			out[i] = c[k]
		}
		return out
	}
	sorted := *tr
	sorted.Times, sorted.Y, sorted.Error, sorted.Shots = pick(tr.Times), pick(tr.Y), pick(tr.Error), pick(tr.Shots)
	if tr.Lines != nil {
		sorted.Lines = make([]int, len(order))
		for i, k := range order {
			sorted.Lines[i] = tr.Lines[k]
		}
	}
	return &sorted
}

// use chooses the predictors of all traces.
func (p *problem) use(which func(m *measured) *experiment.Predictor) {
	for _, m := range p.traces {
		m.predictor = which(m)
	}
}

func exact(m *measured) *experiment.Predictor   { return m.exact }
func rough(m *measured) *experiment.Predictor   { return m.rough }
func central(m *measured) *experiment.Predictor { return m.central }

// predict evaluates the model of a trace, with slopes when wanted.
func (m *measured) predict(ctx context.Context, params []float64, slopes bool) error {
	for j, i := range m.free {
		m.values[j] = m.scales[j].value(params[i])
	}
	if !slopes {
		return m.predictor.Evaluate(ctx, m.values, m.pred, nil)
	}
	if err := m.predictor.Evaluate(ctx, m.values, m.pred, m.slopes); err != nil {
		return err
	}
	for j, i := range m.free {
		f := m.scales[j].slope(params[i])
		for k := range m.slopes[j] {
			m.slopes[j][k] *= f
		}
	}
	return nil
}

// model is the LeastSquares model of all traces. A value that pushes a dial out
// of its range has no residuals there.
func (p *problem) model(params, residuals, jacobian []float64) error {
	n := len(p.params)
	for _, m := range p.traces {
		if err := m.predict(p.ctx, params, jacobian != nil); err != nil {
			if p.ctx.Err() != nil {
				return p.ctx.Err()
			}
			if !p.inside(params) {
				residuals[0] = math.NaN()
				return nil
			}
			return err
		}
		scale, offset := m.scale.at(params), m.offset.at(params)
		for i, y := range m.y {
			row := m.from + i
			residuals[row] = (offset + scale*m.pred[i] - y) / m.sigma[i]
			if jacobian == nil {
				continue
			}
			j := jacobian[row*n : (row+1)*n]
			for k, param := range m.free {
				j[param] += scale * m.slopes[k][i] / m.sigma[i]
			}
			if m.scale.param >= 0 {
				j[m.scale.param] += m.pred[i] / m.sigma[i]
			}
			if m.offset.param >= 0 {
				j[m.offset.param] += 1 / m.sigma[i]
			}
		}
	}
	return nil
}

func (p *problem) inside(params []float64) bool {
	for i, v := range params {
		u := &p.params[i]
		if x := u.scale.value(v); !(x >= u.dial.Low && x <= u.dial.High) {
			return false
		}
	}
	return true
}
