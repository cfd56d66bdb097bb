package experiment

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"runtime"
	"strings"
	"sync"
	"sync/atomic"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/io/table"
	"rhotrace/lindblad"
)

// Settings say how a run is carried out; they never change its answer.
type Settings struct {
	Workers  int                   // goroutines; default (0): one for each processor
	Progress func(done, total int) // called now and then, from any goroutine; default: nobody is told
}

// Run evaluates every point of the experiment's scans. The table has one row
// per point and recorded time; the last scan of the file varies fastest. The
// answer has the same bits for any number of processors.
func Run(ctx context.Context, e *Experiment) (*table.Table, error) {
	return RunWith(ctx, e, Settings{})
}

// RunWith is Run with settings.
func RunWith(ctx context.Context, e *Experiment, set Settings) (*table.Table, error) {
	l, err := newLayout(e, nil, nil)
	if err != nil {
		return nil, err
	}
	points := e.points()
	rec := lindblad.Record{Samples: e.shape.record.samples, During: e.shape.record.during}
	samples := max(1, rec.Samples)
	out := newRows(e, l, points, samples)
	column, step := len(points.dials)-1, -1
	if column >= 0 {
		step = e.lineStep(points.dials[column])
	}
	if step < 0 {
		column = -1
	}
	cuts := lines(points.rows, column)
	stats, warnings, err := each(ctx, l, len(cuts), set, func(v *evaluator, c int) error {
		a, b := cuts[c][0], cuts[c][1]
		values := points.values(e.values, a)
		if b-a == 1 {
			st, err := v.point(ctx, values, rec, samples)
			if err != nil {
				return points.locate(e, a, err)
			}
			return points.locate(e, a, out.put(v, a, values, st, 0))
		}
		durations := make([]float64, b-a)
		for i := range durations {
			durations[i] = points.rows[a+i][column]
		}
		st, err := v.runLine(ctx, values, step, durations)
		if err != nil {
			return points.locate(e, a, err)
		}
		for i := a; i < b; i++ {
			values[points.dials[column]] = points.rows[i][column]
			if err := out.put(v, i, values, st, i-a); err != nil {
				return points.locate(e, i, err)
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	stats.Points = len(points.rows)
	return out.table(stats, append(e.Warnings(), warnings...))
}

// each hands points to workers. The first error in the order of the points
// wins, whichever worker meets it.
func each(ctx context.Context, l *layout, n int, set Settings, do func(v *evaluator, i int) error) (Statistics, []string, error) {
	workers := set.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	workers = max(1, min(workers, n))
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	var (
		next, done  atomic.Int64
		wait        sync.WaitGroup
		mu          sync.Mutex
		failedAt    = n
		failed      error
		stats       Statistics
		allWarnings = map[string]bool{}
	)
	work := func() {
		defer wait.Done()
		v := l.newEvaluator()
		for {
			i := int(next.Add(1)) - 1
			if i >= n || ctx.Err() != nil {
				break
			}
			if err := do(v, i); err != nil {
				mu.Lock()
				if i < failedAt {
					failedAt, failed = i, err
				}
				mu.Unlock()
				next.Store(int64(n))
				break
			}
			if d := done.Add(1); set.Progress != nil {
				set.Progress(int(d), n)
			}
		}
		mu.Lock()
		stats.add(v.solver.Stats())
		for _, w := range v.solver.Warnings() {
			allWarnings[w] = true
		}
		if v.notUnique {
			allWarnings["the steady state is not unique at some point; the one reached from the start is given"] = true
		}
		mu.Unlock()
	}
	for range workers {
		wait.Add(1)
		go work()
	}
	wait.Wait()
	if failed == nil && ctx.Err() != nil {
		failed = ctx.Err()
	}
	return stats, sortedKeys(allWarnings), failed
}

func sortedKeys(m map[string]bool) []string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	for i := range keys {
		for j := i; j > 0 && keys[j] < keys[j-1]; j-- {
			keys[j], keys[j-1] = keys[j-1], keys[j]
		}
	}
	return keys
}

// Statistics say what a run cost. They do not depend on the number of
// processors.
type Statistics struct {
	Points      int     `json:"points"`
	Propagators int     `json:"propagators"` // exact propagators used, computed or remembered
	Applied     int     `json:"applied"`     // times that one was applied to a state
	Steps       int     `json:"steps"`       // steps of integrators in time
	Rejected    int     `json:"rejected"`    // steps repeated shorter
	Products    int     `json:"products"`    // products of the generator with a state
	Projections int     `json:"projections"` // states brought back to the nearest density matrix
	TraceError  float64 `json:"trace_error"` // largest |Tr ρ − 1| of an output
	Lowest      float64 `json:"lowest"`      // most negative eigenvalue met before it was brought back
}

func (s *Statistics) add(e lindblad.Stats) {
	s.Propagators += e.Exponentials + e.Remembered
	s.Applied += e.Applied
	s.Steps += e.Steps
	s.Rejected += e.Rejected
	s.Products += e.Products
	s.Projections += e.Projections
	s.TraceError = math.Max(s.TraceError, e.TraceError)
	s.Lowest = math.Min(s.Lowest, e.LowestFound)
}

// points are the values that the scans give their dials, row by row.
type points struct {
	dials []field
	rows  [][]float64
}

func (e *Experiment) points() points {
	p := points{rows: [][]float64{{}}}
	for _, s := range e.shape.scans {
		p.dials = append(p.dials, s.dials...)
		var rows [][]float64
		for _, before := range p.rows {
			for _, row := range s.rows {
				rows = append(rows, append(append(make([]float64, 0, len(p.dials)), before...), row...))
			}
		}
		p.rows = rows
	}
	return p
}

func (p *points) values(base []float64, i int) []float64 {
	v := append([]float64(nil), base...)
	for k, f := range p.dials {
		v[f] = p.rows[i][k]
	}
	return v
}

// locate says at which point of the scan an error arose.
func (p *points) locate(e *Experiment, i int, err error) error {
	if err == nil || len(p.dials) == 0 || errors.Is(err, context.Canceled) {
		return err
	}
	var at []string
	for k, f := range p.dials {
		d := &e.shape.dials[f]
		at = append(at, d.Path+" = "+d.Format(p.rows[i][k]))
	}
	if own, ok := err.(*Error); ok {
		c := *own
		c.What += " (at " + strings.Join(at, ", ") + ")"
		return &c
	}
	return fmt.Errorf("at %s: %w", strings.Join(at, ", "), err)
}

// rows gathers the columns of a table.
type rows struct {
	e       *Experiment
	l       *layout
	points  points
	samples int
	columns [][]float64 // time, populations, coherences, signal, deviation as asked
	hasTime bool
}

func newRows(e *Experiment, l *layout, p points, samples int) *rows {
	r := &rows{e: e, l: l, points: p, samples: samples, hasTime: e.shape.record.samples > 0}
	for range r.heads() {
		r.columns = append(r.columns, make([]float64, len(p.rows)*samples))
	}
	return r
}

type head struct{ name, unit, about string }

// heads are the columns after those of the scans.
func (r *rows) heads() (list []head) {
	s := r.e.shape
	if r.hasTime {
		list = append(list, head{"time", "s", "time since the start of the record"})
	}
	return append(list, s.stateHeads(r.e)...)
}

// stateHeads are the columns that depend on the state.
func (s *shape) stateHeads(e *Experiment) (list []head) {
	for _, name := range s.levels {
		list = append(list, head{"population." + name, "1", "population of level " + name})
	}
	for _, p := range s.record.coherences {
		name := e.coherenceName(p)
		list = append(list, head{name + ".re", "1", "real part of this coherence in the frame of the drives"},
			head{name + ".im", "1", "imaginary part of this coherence in the frame of the drives"})
	}
	if o := s.readout; o != nil {
		unit, about := o.unit()
		list = append(list, head{"signal", unit, about})
		if o.shots != none {
			list = append(list, head{"signal.sd", unit, "standard error of the signal for this many shots"})
		}
	}
	return list
}

// put writes the rows of point i, from the states that begin at first.
func (r *rows) put(v *evaluator, i int, values []float64, st *states, first int) error {
	s := r.e.shape
	if err := v.settler.settle(values, none, nil); err != nil {
		return v.place(err)
	}
	for k := range r.samples {
		row := i*r.samples + k
		c := 0
		add := func(x float64) {
			r.columns[c][row] = x
			c++
		}
		if r.hasTime {
			add(spacedValue(0, st.lasts, k, r.samples, false))
		}
		state := st.values[first+k]
		for a := range s.levels {
			add(tidy(state[a]))
		}
		for j := range s.record.coherences {
			add(state[len(s.levels)+2*j])
			add(state[len(s.levels)+2*j+1])
		}
		if o := s.readout; o != nil {
			y := o.signal(v.settler.x, v.averagesOf(state, nil)).Real
			if math.IsNaN(y) || math.IsInf(y, 0) {
				return &Error{File: s.file, Path: "readout.among", What: "the levels among which the signal is read are empty, so there is nothing to divide by"}
			}
			if o.what == readBright {
				y = tidy(y)
			}
			add(y)
			if o.shots != none {
				add(o.deviation(y, v.settler.x))
			}
		}
	}
	return nil
}

// tidy takes away what rounding leaves below zero of a probability: people and
// logarithms dislike −2e-16.
func tidy(p float64) float64 {
	if p < 0 && p > -1e-12 {
		return 0
	}
	return p
}

// averagesOf reads columns of a state as dual numbers (slope nil: zero).
func (l *layout) averagesOf(state, slope []float64) averages {
	at := func(c int) dual.Number {
		d := dual.Number{Real: state[c]}
		if slope != nil {
			d.Emag = slope[c]
		}
		return d
	}
	n := len(l.e.shape.levels)
	return averages{
		population: at,
		coherence: func(a, b int) (re, im dual.Number) {
			for i, p := range l.pairs {
				switch p {
				case [2]int{a, b}:
					return at(n + 2*i), at(n + 2*i + 1)
				case [2]int{b, a}:
					return at(n + 2*i), dual.Scale(-1, at(n+2*i+1))
				}
			}
			panic("experiment: a coherence is read that was not kept")
		},
		photons: at(l.columns - 1),
	}
}

// table puts the columns together with the record of how they were made.
func (r *rows) table(stats Statistics, warnings []string) (*table.Table, error) {
	t := &table.Table{Meta: map[string]string{}}
	for k, f := range r.points.dials {
		d := &r.e.shape.dials[f]
		column := make([]float64, len(r.points.rows)*r.samples)
		for i := range column {
			column[i] = r.points.rows[i/r.samples][k]
		}
		t.Add(d.Path, d.Unit, d.Doc, column)
	}
	for k, h := range r.heads() {
		t.Add(h.name, h.unit, h.about, r.columns[k])
	}
	statistics, err := json.Marshal(stats)
	if err != nil {
		return nil, err
	}
	t.Meta[table.MetaExperiment] = string(r.e.Text())
	t.Meta[table.MetaVersion] = Version
	t.Meta[table.MetaStatistics] = string(statistics)
	for name, text := range r.e.filesBeside() {
		t.Meta[table.MetaFile+name] = string(text)
	}
	t.Warnings = warnings
	return t, nil
}

// Version is the version of the program that made a table.
const Version = "0.1.0"
