package experiment

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/lindblad"
	"rhotrace/models"
)

// layout is what the runs of one experiment share: the model laid out for the
// engine and the list of state columns. It does not change and is shared by
// goroutines.
type layout struct {
	e        *Experiment
	free     []field // dials with respect to which slopes are wanted
	lab      *models.Layout
	engine   *lindblad.Layout
	memory   *lindblad.Memory
	pairs    [][2]int // coherences kept
	accuracy float64
	central  bool // spreads are left out
	columns  int  // numbers per state: populations, re and im of pairs, photons
}

func newLayout(e *Experiment, free []field, extra [][2]int) (*layout, error) {
	s := e.shape
	lab, err := models.NewLayout(s.model())
	if err != nil {
		return nil, err
	}
	used := make([]bool, len(s.steps))
	uses(s.sequence.order, used)
	on := make([]bool, len(s.drives))
	for i, st := range s.steps {
		for _, d := range st.on {
			on[d] = on[d] || used[i]
		}
	}
	counters := 0
	if s.readout != nil && len(s.readout.counted) > 0 {
		counters = 1
	}
	engine, err := lindblad.NewLayout(len(s.levels), lab.Active(on), s.start.support(len(s.levels)), counters)
	if err != nil {
		return nil, err
	}
	l := &layout{e: e, free: free, lab: lab, engine: engine, memory: lindblad.NewMemory(0), accuracy: e.shape.accuracy}
	seen := map[[2]int]bool{}
	for _, list := range [][][2]int{s.record.coherences, s.readoutPairs(), extra} {
		for _, p := range list {
			if !seen[p] {
				seen[p] = true
				l.pairs = append(l.pairs, p)
			}
		}
	}
	l.columns = len(s.levels) + 2*len(l.pairs) + 1
	return l, nil
}

func (s *shape) readoutPairs() [][2]int {
	if s.readout == nil {
		return nil
	}
	return s.readout.pairs
}

// support lists the elements of ρ that can be non-zero at the start.
func (s *start) support(levels int) *lindblad.Support {
	sup := lindblad.NewSupport(levels)
	for _, a := range s.levels {
		sup.AddElement(a, a)
	}
	for i, a := range s.phased {
		for _, b := range s.phased[i+1:] {
			sup.AddElement(a, b)
		}
	}
	return sup
}

// evaluator runs single points of an experiment. It holds buffers and belongs
// to one goroutine.
type evaluator struct {
	*layout
	directions []field // the free dials, or none when no slopes are wanted
	settler    *settler
	solver     *lindblad.Solver
	settings   models.Settings
	stretches  []lindblad.Stretch
	order      []lindblad.Node
	x0         []float64
	dx0        [][]float64
	rho        []complex128
	drho       []complex128
	used       []bool
	line       []float64 // durations of step lineStep that are run together; nil: one point
	lineStep   int
	notUnique  bool // some steady state was not the only one
}

func (l *layout) newEvaluator() *evaluator {
	s := l.e.shape
	v := &evaluator{layout: l, directions: l.free, settler: newSettler(l.e), used: make([]bool, len(s.steps))}
	uses(s.sequence.order, v.used)
	v.solver = lindblad.NewSolver(l.engine, l.memory, lindblad.Settings{Accuracy: l.accuracy})
	v.settings = models.Settings{
		Energies: make([]dual.Number, len(s.levels)),
		Drives:   make([]models.DriveSettings, len(s.drives)), Decays: make([]models.DecaySettings, len(s.decays)),
		Dephasings: make([]models.WeightSettings, len(s.dephasings)), Shifts: make([]models.WeightSettings, len(s.shifts)),
	}
	for i, d := range s.drives {
		v.settings.Drives[i].Elements = make([]dual.Number, len(d.elements))
	}
	for i, d := range s.decays {
		v.settings.Decays[i].Shares = make([]dual.Number, len(d.shares))
	}
	for i, d := range s.dephasings {
		v.settings.Dephasings[i].Weights = make([]dual.Number, len(d.weights))
	}
	for i, d := range s.shifts {
		v.settings.Shifts[i].Weights = make([]dual.Number, len(d.weights))
	}
	for range s.steps {
		v.stretches = append(v.stretches, l.lab.NewStretch(len(l.free)))
	}
	n := l.engine.Len()
	v.x0 = make([]float64, n)
	v.dx0 = make([][]float64, len(l.free))
	for j := range v.dx0 {
		v.dx0[j] = make([]float64, n)
	}
	v.rho = make([]complex128, len(s.levels)*len(s.levels))
	v.drho = make([]complex128, len(v.rho))
	return v
}

// optional is a dial's value, or a standard when the file has none.
func optional(x []dual.Number, f field, standard float64) dual.Number {
	if f == none {
		return dual.Number{Real: standard}
	}
	return x[f]
}

// base fills the settings that hold outside of any step.
func (v *evaluator) base(x []dual.Number) {
	s := v.e.shape
	for a, f := range s.energies {
		v.settings.Energies[a] = optional(x, f, 0)
	}
	for i, d := range s.drives {
		set := &v.settings.Drives[i]
		set.On = false
		set.Rabi, set.Detuning, set.Phase = x[d.rabi], x[d.detuning], x[d.phase]
		set.Linewidth = optional(x, d.linewidth, 0)
		set.Pulse, set.Quadrature, set.Chirped = nil, nil, false
		for j, f := range d.elements {
			set.Elements[j] = optional(x, f, 1)
		}
	}
	for i, d := range s.decays {
		set := &v.settings.Decays[i]
		set.Rate = d.given.decayRate(x[d.size])
		set.Reverse = optional(x, d.reverse, 0)
		rest := dual.Number{Real: 1}
		for j, f := range d.shares {
			set.Shares[j] = optional(x, f, 1)
			if !d.joint && f != none {
				rest = dual.Sub(rest, x[f])
			}
		}
		if !d.joint {
			set.Shares[0] = rest
		}
	}
	for i, d := range s.dephasings {
		v.weigh(&v.settings.Dephasings[i], d.given.dephasingRate(x[d.size]), d.weights, x)
	}
	for i, d := range s.shifts {
		v.weigh(&v.settings.Shifts[i], x[d.size], d.weights, x)
		v.settings.Shifts[i].Pulse = nil
	}
}

func (v *evaluator) weigh(set *models.WeightSettings, size dual.Number, weights []field, x []dual.Number) {
	set.Size = size
	for j, f := range weights {
		set.Weights[j] = x[f]
	}
}

func (g given) decayRate(v dual.Number) dual.Number {
	switch g {
	case byLifetime:
		return models.RateOfLifetime(v)
	case byLinewidth:
		return models.RateOfLinewidth(v)
	}
	return v
}

func (g given) dephasingRate(v dual.Number) dual.Number {
	switch g {
	case byLifetime:
		return models.RateOfLifetime(v)
	case byLinewidth:
		return models.DephasingOfLinewidth(v)
	}
	return v
}

// fill writes the stretch of step i for one direction (−1: values).
func (v *evaluator) fill(i, direction int, x []dual.Number) {
	s := v.e.shape
	st := s.steps[i]
	v.base(x)
	for _, d := range st.on {
		v.settings.Drives[d].On = true
	}
	for k := range st.changes {
		v.apply(&st.changes[k], x)
	}
	v.settings.Counting = s.readout != nil && s.readout.what == readEmission && s.readout.during == i
	out := &v.stretches[i]
	if st.ideal {
		// The angle follows the Rabi frequency over what it was in the file.
		first := &v.settings.Drives[st.on[0]]
		angle := dual.Mul(x[st.area], dual.Scale(2*math.Pi/st.turnRate, first.Rabi))
		v.lab.FillRotation(out, &v.settings, st.on[0], angle, direction)
		return
	}
	switch {
	case st.area == none:
		v.settings.Lasts = optional(x, st.lasts, 1) // without end: any time will do
	case st.lasts == none:
		v.settings.Lasts = dual.Number{Real: x[st.area].Real / st.turnRate, Emag: x[st.area].Emag / st.turnRate}
	default:
		v.settings.Lasts = x[st.lasts]
		first := &v.settings.Drives[st.on[0]]
		first.Rabi = dual.Mul(first.Rabi, dual.Scale(1/(st.turnRate*st.integral), x[st.area]))
	}
	for _, d := range st.on {
		set := &v.settings.Drives[d]
		set.Pulse, set.Quadrature = st.courseOf(d).pulses(x, v.settings.Lasts)
		if f := st.chirpOf(d); f != none {
			set.Chirped, set.Chirp = true, x[f]
		}
	}
	for k := range st.changes {
		if ch := &st.changes[k]; ch.kind == shiftBlock && ch.course.given {
			v.settings.Shifts[ch.index].Pulse, _ = ch.course.pulses(x, v.settings.Lasts)
		}
	}
	v.lab.Fill(out, &v.settings, direction)
}

// apply changes the settings as one step says.
func (v *evaluator) apply(ch *change, x []dual.Number) {
	switch ch.kind {
	case driveBlock:
		d := &v.settings.Drives[ch.index]
		d.Detuning = dual.Add(d.Detuning, optional(x, ch.detuning, 0))
		d.Phase = dual.Add(d.Phase, optional(x, ch.phase, 0))
		d.Rabi = dual.Mul(d.Rabi, optional(x, ch.scale, 1))
	case shiftBlock:
		d := &v.settings.Shifts[ch.index]
		if ch.course.given {
			d.Extra = optional(x, ch.size, 0)
			return // its course is filled in with the duration
		}
		d.Size = dual.Add(d.Size, optional(x, ch.size, 0))
	case decayBlock:
		d := &v.settings.Decays[ch.index]
		d.Rate = dual.Add(d.Rate, optional(x, ch.rate, 0))
	case dephasingBlock:
		d := &v.settings.Dephasings[ch.index]
		d.Size = dual.Add(d.Size, optional(x, ch.rate, 0))
	}
}

// density is the start state and its slope.
func (s *start) density(x []dual.Number, levels int, rho, drho []complex128) {
	clear(rho)
	clear(drho)
	p := make([]dual.Number, levels)
	rest := dual.Number{Real: 1}
	for i, f := range s.populations {
		if f != none {
			p[s.levels[i]] = x[f]
			rest = dual.Sub(rest, x[f])
		}
	}
	for i, f := range s.populations {
		if f == none {
			rest.Real = math.Max(0, rest.Real)
			p[s.levels[i]] = rest
		}
	}
	for a, v := range p {
		rho[a*levels+a], drho[a*levels+a] = complex(v.Real, 0), complex(v.Emag, 0)
	}
	for i, a := range s.phased {
		for j, b := range s.phased {
			if i == j || p[a].Real <= 0 || p[b].Real <= 0 {
				continue
			}
			size := dual.Sqrt(dual.Mul(p[a], p[b]))
			turn := dual.Sub(x[s.phases[i]], x[s.phases[j]])
			e := cmplx.Exp(complex(0, turn.Real))
			rho[a*levels+b] = complex(size.Real, 0) * e
			drho[a*levels+b] = complex(size.Emag, size.Real*turn.Emag) * e
		}
	}
}

// states are the averaged answers of one point: for each sample its columns,
// and for each free dial the slopes of the columns.
type states struct {
	values [][]float64
	slopes [][][]float64 // [direction][sample][column]
	lasts  float64       // recorded duration, s
	dlasts []float64
}

func newStates(samples, columns, directions int) *states {
	s := &states{values: grid(samples, columns), dlasts: make([]float64, directions)}
	for range directions {
		s.slopes = append(s.slopes, grid(samples, columns))
	}
	return s
}

func grid(n, m int) [][]float64 {
	flat := make([]float64, n*m)
	g := make([][]float64, n)
	for i := range g {
		g[i] = flat[i*m : (i+1)*m : (i+1)*m]
	}
	return g
}

// shot runs one shot: values with the spreads' deviates z (nil: none), and adds
// weight times its states to into.
func (v *evaluator) shot(ctx context.Context, values, z []float64, weight float64, record lindblad.Record, into *states) error {
	s := v.e.shape
	n := len(s.levels)
	for j := len(v.directions) - 1; j >= -1; j-- { // values last, so that the settler holds them
		direction := none
		if j >= 0 {
			direction = v.directions[j]
		}
		if err := v.settler.settle(values, direction, z); err != nil {
			return err
		}
		x := v.settler.x
		for i := range s.steps {
			v.stretches[i].Slopes = v.stretches[i].Slopes[:len(v.directions)]
			if v.used[i] {
				v.fill(i, j, x)
			}
		}
		s.start.density(x, n, v.rho, v.drho)
		if j >= 0 {
			v.engine.SetState(v.dx0[j], v.drho)
		} else {
			v.engine.SetState(v.x0, v.rho)
		}
		v.recorded(j, values, weight, into)
	}
	v.order = tree(v.order, s.sequence.order, values)
	emit := func(k int, x []float64, dx [][]float64) error {
		v.collect(k, x, dx, values, z, weight, into)
		return nil
	}
	if s.record.steady && record.Times == nil {
		return v.steady(ctx, values, z, weight, into)
	}
	if v.line != nil {
		return v.solver.Fan(ctx, v.x0, v.dx0[:len(v.directions)], v.stretches, v.order, v.lineStep, v.line, emit)
	}
	return v.solver.Run(ctx, v.x0, v.dx0[:len(v.directions)], v.stretches, v.order, record, emit)
}

// steady adds the state to which the order leads when it is repeated without
// end.
func (v *evaluator) steady(ctx context.Context, values, z []float64, weight float64, into *states) error {
	x, dx, unique, err := v.solver.Steady(ctx, v.x0, v.stretches, v.order)
	if err != nil {
		return fmt.Errorf("%s: record.when: %w", v.e.shape.file, err)
	}
	if !unique {
		v.notUnique = true
	}
	v.collect(0, x, dx, values, z, weight, into)
	return nil
}

// recorded adds the length of the recorded time.
func (v *evaluator) recorded(j int, values []float64, weight float64, into *states) {
	s := v.e.shape
	lasts := func(i int) float64 {
		switch st := &v.stretches[i]; {
		case st.Ideal:
			return 0
		case j >= 0:
			return st.Slopes[j].Lasts
		default:
			return st.Lasts
		}
	}
	t := 0.0
	if s.record.during >= 0 {
		t = lasts(s.record.during)
	} else {
		t = total(s.sequence.order, values, lasts)
	}
	if j >= 0 {
		into.dlasts[j] += weight * t
	} else {
		into.lasts += weight * t
	}
}

// collect adds one state to the averages.
func (v *evaluator) collect(k int, x []float64, dx [][]float64, values, z []float64, weight float64, into *states) {
	v.keep(x, weight, into.values[k])
	for j := range dx {
		v.keep(dx[j], weight, into.slopes[j][k])
	}
	if o := v.e.shape.readout; o != nil && o.what == readEmission {
		v.photons(k, x, dx, values, z, weight, into)
	}
}

// keep adds weight times populations and coherences to columns.
func (v *evaluator) keep(x []float64, weight float64, columns []float64) {
	n := len(v.e.shape.levels)
	for a := range n {
		columns[a] += weight * v.engine.Population(x, a)
	}
	for i, p := range v.pairs {
		c := v.engine.Coherence(x, p[0], p[1])
		columns[n+2*i] += weight * real(c)
		columns[n+2*i+1] += weight * imag(c)
	}
}

// photons adds the emission: what was counted, or the rate at this moment.
func (v *evaluator) photons(k int, x []float64, dx [][]float64, values, z []float64, weight float64, into *states) {
	last := v.columns - 1
	if v.e.shape.readout.during >= 0 {
		into.values[k][last] += weight * v.engine.Counter(x, 0)
		for j := range dx {
			into.slopes[j][k][last] += weight * v.engine.Counter(dx[j], 0)
		}
		return
	}
	for j := -1; j < len(dx); j++ {
		direction, slope := none, make([]float64, len(x))
		if j >= 0 {
			direction, slope = v.directions[j], dx[j]
		}
		if v.settler.settle(values, direction, z) != nil {
			return // settled before, in shot
		}
		v.base(v.settler.x)
		rate := v.lab.Emission(&v.settings, func(a, b int) dual.Number {
			if a == b {
				return dual.Number{Real: v.engine.Population(x, a), Emag: v.engine.Population(slope, a)}
			}
			return dual.Number{Real: real(v.engine.Coherence(x, a, b)), Emag: real(v.engine.Coherence(slope, a, b))}
		})
		if j >= 0 {
			into.slopes[j][k][last] += weight * rate.Emag
		} else {
			into.values[k][last] += weight * rate.Real
		}
	}
}

// point runs one point of a scan, averaged over the spreads.
func (v *evaluator) point(ctx context.Context, values []float64, record lindblad.Record, samples int) (*states, error) {
	if err := v.e.shape.sequence.checkLength(values); err != nil {
		return nil, fmt.Errorf("%s: %w", v.e.shape.file, err)
	}
	if err := v.e.shape.start.check(values); err != nil {
		e := &Error{File: v.e.shape.file, What: err.Error()}
		if n := v.e.shape.root.at("start.populations"); n != nil {
			e.Line = n.line
		}
		return nil, e
	}
	if len(v.e.shape.spreads) > 0 && !v.central {
		return v.spreadPoint(ctx, values, record, samples)
	}
	out := newStates(samples, v.columns, len(v.directions))
	if err := v.shot(ctx, values, nil, 1, record, out); err != nil {
		return nil, v.place(err)
	}
	return out, nil
}

func (v *evaluator) place(err error) error {
	if s, ok := err.(*settleError); ok {
		return &Error{File: v.e.shape.file, What: s.Error()}
	}
	return err
}
