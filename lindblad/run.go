package lindblad

import (
	"context"
	"errors"
	"fmt"
	"math"
	"sort"
)

// Settings of a solver. The zero value means the stated defaults.
type Settings struct {
	Accuracy   float64 // bound on the true error of any element of ρ, 1e-12 to 1e-2 (default 1e-8)
	RungeKutta bool    // carry every stretch by Runge–Kutta steps, as an independent method (default: the fastest method)
}

// Stats says what a solver did, over all its runs.
type Stats struct {
	Exponentials int     // propagators computed
	Remembered   int     // propagators found in the memory
	Applied      int     // propagators applied to a state
	Steps        int     // steps of the integrator in time
	Rejected     int     // steps that were repeated shorter
	Products     int     // sparse products of these steps
	Projections  int     // states brought back into the cone of density matrices
	TraceError   float64 // largest |Tr ρ − Tr ρ(0)| of an output
	LowestFound  float64 // most negative eigenvalue met at an output before it was brought back
}

// Solver runs sequences on one layout. It owns workspaces: one goroutine each.
type Solver struct {
	l          *Layout
	memory     *Memory
	accuracy   float64
	rungeKutta bool
	stats      Stats
	warnings   []string

	k       int // directions of this run
	x       []float64
	y       []float64
	dx      [][]float64
	out     []float64
	vals    []float64
	key     []float64
	slots   []slots
	methods []method
	plays   []float64
	ring    [8][4]float64
	squares [3][16]float64
	exp     exponential
	shaped  shaped
	periods periodic
	cone    cone
	theta   []float64
	dtheta  [][]float64
	groups  map[*Node]*groupMap
	perTime float64

	ctx       context.Context
	given     []Stretch
	stretches []Stretch // with constant terms folded into the coefficients
	folds     []bool
	rec       Record
	emit      func(sample int, x []float64, dx [][]float64) error
	clock     clock
	played    int
	trace     float64
	watch     float64 // how far the state may have left the cone since it was checked
}

// clock follows the recorded time.
type clock struct {
	running bool
	done    bool // the recorded stretch has been played
	now     float64
	lost    float64 // rounding of now
	dnow    []float64
	total   float64
	dtotal  []float64
	next    int
	samples int
	step    float64
	same    float64   // times closer than this are equal
	times   []float64 // given times; nil: equally spaced ones
}

// NewSolver returns a solver with memory m, which may be nil.
func NewSolver(l *Layout, m *Memory, s Settings) *Solver {
	v := new(Solver)
	v.Use(l, m, s)
	return v
}

// Use makes the solver anew for another layout, reusing its workspaces.
func (s *Solver) Use(l *Layout, m *Memory, set Settings) {
	s.l, s.memory, s.accuracy, s.rungeKutta = l, m, set.Accuracy, set.RungeKutta
	if s.accuracy == 0 {
		s.accuracy = 1e-8
	}
	s.accuracy = math.Min(math.Max(s.accuracy, 1e-12), 1e-2)
	s.stats, s.warnings = Stats{}, s.warnings[:0]
}

// Stats returns what was done so far.
func (s *Solver) Stats() Stats { return s.stats }

// Warnings returns doubts about the results so far.
func (s *Solver) Warnings() []string { return s.warnings }

// limited warns when rounding errs by more than was asked.
func (s *Solver) limited(rounding float64) {
	if rounding > s.accuracy {
		s.warn("rounding limits the result to an error above the accuracy asked for: fast frequencies for a long time; give them a frame of their own")
	}
}

func (s *Solver) warn(text string) {
	for _, w := range s.warnings {
		if w == text {
			return
		}
	}
	s.warnings = append(s.warnings, text)
}

// Run plays the order from the state x0 and hands out states. dx0 holds one
// tangent ∂x/∂θ_j per direction; nil tangents are zero. The states handed to
// emit belong to the solver: they change after emit returns. With
// rec.Samples = 0 emit is called once, at the end of the sequence.
func (s *Solver) Run(ctx context.Context, x0 []float64, dx0 [][]float64, stretches []Stretch, order []Node, rec Record,
	emit func(sample int, x []float64, dx [][]float64) error) error {
	if err := s.begin(ctx, x0, dx0, stretches, order, rec); err != nil {
		return err
	}
	s.emit = emit
	if err := s.playAll(order); err != nil {
		return err
	}
	if s.rec.Samples == 0 {
		s.keep()
		copy(s.out, s.x)
		return s.deliver(0)
	}
	if rec.During >= 0 && !s.clock.done {
		return fmt.Errorf("lindblad: samples during stretch %d, which the order never plays", rec.During)
	}
	return s.handRest()
}

// begin checks what is to be played and sets the state and the clock.
func (s *Solver) begin(ctx context.Context, x0 []float64, dx0 [][]float64, stretches []Stretch, order []Node, rec Record) error {
	l := s.l
	if len(x0) != l.n {
		panic(fmt.Sprintf("lindblad: a state of length %d for a layout of %d", len(x0), l.n))
	}
	s.k = len(dx0)
	rotors := 0
	for i := range stretches {
		s.k = max(s.k, len(stretches[i].Slopes))
		rotors = max(rotors, len(stretches[i].Rotors))
	}
	for i := range stretches {
		if err := l.checkStretch(i, &stretches[i], rotors, s.k); err != nil {
			return err
		}
	}
	if err := checkNodes(order, len(stretches)); err != nil {
		return err
	}
	if rec.Times != nil {
		rec.Samples = len(rec.Times)
		if !allFinite(rec.Times) || !sort.Float64sAreSorted(rec.Times) {
			return errors.New("lindblad: recorded times must be finite and must not decrease")
		}
	} else if rec.Samples < 0 || rec.Samples == 1 {
		return fmt.Errorf("lindblad: %d samples; 0 or at least 2 are wanted", rec.Samples)
	}
	if rec.During >= len(stretches) {
		return fmt.Errorf("lindblad: samples during stretch %d of %d", rec.During, len(stretches))
	}
	n := l.n
	s.ctx, s.rec = ctx, rec
	s.x, s.y, s.out = zeroed(s.x, (1+s.k)*n), sized(s.y, (1+s.k)*n), sized(s.out, (1+s.k)*n)
	copy(s.x, x0)
	for j, d := range dx0 {
		if d != nil && len(d) != n {
			panic(fmt.Sprintf("lindblad: a tangent of length %d for a layout of %d", len(d), n))
		}
		copy(s.x[(1+j)*n:(2+j)*n], d)
	}
	if !allFinite(s.x) {
		return errors.New("lindblad: the start state is not finite")
	}
	s.dx = sized(s.dx, s.k)
	for j := range s.dx {
		s.dx[j] = s.out[(1+j)*n : (2+j)*n]
	}
	s.theta = zeroed(s.theta, rotors)
	s.dtheta = sized(s.dtheta, s.k)
	for j := range s.dtheta {
		s.dtheta[j] = zeroed(s.dtheta[j], rotors)
	}
	s.groups = nil
	s.slots = sized(s.slots, len(stretches))
	for i := range s.slots {
		s.slots[i].used, s.slots[i].next = 0, 0
	}
	s.played = 0
	s.trace = l.trace(x0)
	s.watch = math.Inf(1)
	s.unfold(stretches)
	s.choose(order)
	s.startClock(order)
	return nil
}

// total adds the duration of the order and its slopes.
func (s *Solver) total(order []Node, times float64, sum *float64, slopes []float64) (shaped float64) {
	for i := range order {
		n := &order[i]
		if n.Group != nil {
			shaped += s.total(n.Group, times*float64(n.Repeat), sum, slopes)
			continue
		}
		st := &s.stretches[n.Stretch]
		if st.Ideal {
			continue
		}
		*sum += times * st.Lasts
		for j := range st.Slopes {
			slopes[j] += times * st.Slopes[j].Lasts
		}
		if s.methods[n.Stretch] != byPropagator {
			shaped += times * st.Lasts
		}
	}
	return shaped
}

func (s *Solver) startClock(order []Node) {
	c := &s.clock
	c.running, c.done = s.rec.During < 0 && s.rec.Samples > 0, false
	c.now, c.lost, c.next, c.samples, c.times = 0, 0, 0, s.rec.Samples, s.rec.Times
	c.dnow, c.dtotal = zeroed(c.dnow, s.k), zeroed(c.dtotal, s.k)
	c.total = 0
	shaped := s.total(order, 1, &c.total, c.dtotal)
	s.perTime = 0
	if shaped > 0 {
		s.perTime = 0.8 * s.accuracy / shaped
	}
	c.set()
}

func (c *clock) set() {
	c.step = 0
	if c.samples > 1 && c.times == nil {
		c.step = c.total / float64(c.samples-1)
	}
	c.same = 1e-13 * c.total
}

// at is the time of sample i.
func (c *clock) at(i int) float64 {
	if c.times != nil {
		return c.times[i]
	}
	return c.total * (float64(i) / float64(c.samples-1))
}

// fraction is what sample i moves by when the recorded duration grows by one:
// given times stand still.
func (c *clock) fraction(i int) float64 {
	if c.times != nil {
		return 0
	}
	return float64(i) / float64(c.samples-1)
}

// lastBefore is the last sample before time t, and not at it; −1 when the clock
// stands still.
func (c *clock) lastBefore(t float64) int {
	if !c.running || c.next >= c.samples {
		return -1
	}
	j := c.samples - 1
	switch {
	case c.step > 0:
		j = int(math.Min(float64(j), math.Ceil((t-c.same)/c.step)+1))
	case c.times != nil:
		return sort.SearchFloat64s(c.times, t-c.same) - 1
	}
	for j >= 0 && c.at(j) >= t-c.same {
		j--
	}
	return j
}

// due tells whether the next sample lies before time t, and not at it.
func (c *clock) due(t float64) bool {
	return c.running && c.next < c.samples && c.at(c.next) < t-c.same
}

// pass moves the clock on by a duration with slopes (times more).
func (s *Solver) pass(st *Stretch) {
	c := &s.clock
	if c.running {
		y := st.Lasts + c.lost
		t := c.now + y
		c.lost = y - (t - c.now)
		c.now = t
		for j := range st.Slopes {
			c.dnow[j] += st.Slopes[j].Lasts
		}
	}
	for r, w := range st.Rotors {
		s.theta[r] = math.Remainder(s.theta[r]+turn(w, st.Lasts), 2*math.Pi)
		for j := range st.Slopes {
			d := &st.Slopes[j]
			s.dtheta[j][r] += w * d.Lasts
			if d.Rotors != nil {
				s.dtheta[j][r] += d.Rotors[r] * st.Lasts
			}
		}
	}
}

func (s *Solver) playAll(order []Node) error {
	for i := range order {
		n := &order[i]
		var err error
		if n.Group != nil {
			err = s.playGroup(n)
		} else {
			err = s.playStretch(n.Stretch)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

func (s *Solver) playStretch(i int) error {
	if s.played++; s.played%256 == 0 && s.ctx.Err() != nil {
		return s.ctx.Err()
	}
	s.fold(i)
	st := &s.stretches[i]
	c := &s.clock
	opens := s.rec.Samples > 0 && i == s.rec.During && !c.done
	if opens {
		c.running, c.now, c.lost, c.total = true, 0, 0, st.Lasts
		if st.Ideal {
			c.total = 0
		}
		clear(c.dnow)
		clear(c.dtotal)
		if !st.Ideal {
			for j := range st.Slopes {
				c.dtotal[j] = st.Slopes[j].Lasts
			}
		}
		c.set()
	}
	var err error
	switch {
	case st.Ideal:
		err = s.advance(i, 1)
	case st.Lasts == 0:
		s.l.generator(s.needVals(), st.Coef)
		s.slideEnd(st)
		s.pass(st)
	case s.methods[i] == byRungeKutta:
		err = s.playRungeKutta(i)
	case s.methods[i] == byPropagator:
		err = s.playConstant(i)
	default:
		err = s.playShaped(i)
	}
	if err == nil && opens {
		err = s.handRest()
		c.running, c.done = false, true
	}
	return err
}

func (s *Solver) needVals() []float64 {
	s.vals = sized(s.vals, len(s.l.col))
	return s.vals
}

// playConstant steps by propagators from sample to sample.
func (s *Solver) playConstant(i int) error {
	st := &s.stretches[i]
	c := &s.clock
	pos := 0.0
	moved := false
	start, usual := c.now, c.step
	for last := c.lastBefore(start + st.Lasts); c.next <= last; {
		step := c.at(c.next) - start - pos
		if step > c.same {
			if math.Abs(step-usual) <= c.same {
				step = usual
			}
			usual = step
			if err := s.advance(i, step); err != nil {
				return err
			}
			moved = true
		}
		pos = c.at(c.next) - start
		if err := s.handDuring(st); err != nil {
			return err
		}
		if c.next < last && c.times == nil && !s.sliding() {
			if err := s.stride(i, last); err != nil {
				return err
			}
			pos = c.at(last) - start
			moved = true
		}
	}
	rest := st.Lasts - pos
	if !moved || rest > c.same {
		if moved && math.Abs(rest-c.step) <= c.same {
			rest = c.step
		}
		if err := s.advance(i, rest); err != nil {
			return err
		}
	}
	if s.slides(st) {
		s.l.generator(s.needVals(), st.Coef)
		s.slideEnd(st)
	}
	s.pass(st)
	return nil
}

// stride goes from sample to sample up to the last by one propagator. When
// nothing moves any more, the state stays: the map contracts, so no later step
// moves it more than this one did.
func (s *Solver) stride(i, last int) error {
	c := &s.clock
	p := s.propagator(i, c.step)
	n := s.l.n
	still := 0.01 * s.accuracy / float64(n*c.samples)
	size := (1 + s.k) * n
	x, y := s.x[:size], s.y[:size]
	for j := range s.dx {
		s.dx[j] = x[(1+j)*n : (2+j)*n]
	}
	resting := false
	if n == 4 && s.k == 0 && last-c.next > 4*len(s.ring) {
		if err := s.stride4(p, last); err != nil {
			return err
		}
	}
	for c.next <= last {
		if !resting {
			s.apply(p)
			s.watch += p.worst
			if c.next%8 == 0 {
				resting = s.rests(x, y, still)
			}
		}
		s.keep()
		if err := s.emit(c.next, x[:n], s.dx); err != nil {
			return err
		}
		c.next++
	}
	for j := range s.dx {
		s.dx[j] = s.out[(1+j)*n : (2+j)*n]
	}
	return nil
}

// stride4 is stride for two levels. One step waits for the one before, so eight
// states go side by side, each by eight steps at once.
func (s *Solver) stride4(p *propagator, last int) error {
	c := &s.clock
	var two, four, eight full
	a := &p.q
	for i, b := range []*full{&two, &four, &eight} {
		b.a = s.squares[i][:]
		b.n, b.m = 4, 4
		b.square(a)
		b.conserve(s.l.pops, b.spareRows(s.exp.spare, s.l.pops))
		a = b
	}
	for i := range s.ring {
		s.apply(p)
		copy(s.ring[i][:], s.x[:4])
		if err := s.emit(c.next, s.ring[i][:], s.dx); err != nil {
			return err
		}
		c.next++
	}
	worst := rounding(4, 3) + p.worst
	q := &s.squares[2]
	for c.next+len(s.ring) <= last {
		for i := range s.ring {
			x := &s.ring[i]
			x0, x1, x2, x3 := x[0], x[1], x[2], x[3]
			x[0] = x0 + ((q[0]*x0 + q[1]*x1) + (q[2]*x2 + q[3]*x3))
			x[1] = x1 + ((q[4]*x0 + q[5]*x1) + (q[6]*x2 + q[7]*x3))
			x[2] = x2 + ((q[8]*x0 + q[9]*x1) + (q[10]*x2 + q[11]*x3))
			x[3] = x3 + ((q[12]*x0 + q[13]*x1) + (q[14]*x2 + q[15]*x3))
		}
		if s.watch += worst; s.watch > watchEvery {
			for i := range s.ring {
				s.guard(s.ring[i][:])
			}
		}
		for i := range s.ring {
			if err := s.emit(c.next, s.ring[i][:], s.dx); err != nil {
				return err
			}
			c.next++
		}
		s.stats.Applied += len(s.ring)
	}
	copy(s.x, s.ring[len(s.ring)-1][:])
	return nil
}

// rests tells whether the last move y of the state x was next to nothing.
func (s *Solver) rests(x, y []float64, still float64) bool {
	n := s.l.n
	for q := 0; q <= s.k; q++ {
		size := 1.0
		if q > 0 {
			size = largest(x[q*n : (q+1)*n])
		}
		if !(largest(y[q*n:(q+1)*n]) <= still*size) {
			return false
		}
	}
	return true
}

func largest(x []float64) float64 {
	var most float64
	for _, v := range x {
		if v < 0 {
			v = -v
		}
		if !(v <= most) {
			most = v
		}
	}
	return most
}

// sliding tells whether samples within the stretch move along a direction.
func (s *Solver) sliding() bool {
	for j := 0; j < s.k; j++ {
		if s.clock.dtotal[j] != 0 || s.clock.dnow[j] != 0 {
			return true
		}
	}
	return false
}

// slides tells whether the duration depends on a direction.
func (s *Solver) slides(st *Stretch) bool {
	for j := range st.Slopes {
		if st.Slopes[j].Lasts != 0 {
			return true
		}
	}
	return false
}

// slideEnd adds L x ∂lasts to the tangents; s.vals holds L.
func (s *Solver) slideEnd(st *Stretch) {
	if !s.slides(st) {
		return
	}
	n := s.l.n
	s.l.times(s.y[:n], s.vals, s.x[:n])
	for j := range st.Slopes {
		if d := st.Slopes[j].Lasts; d != 0 {
			for i, v := range s.y[:n] {
				s.x[(1+j)*n+i] += v * d
			}
		}
	}
}

// playShaped integrates in time.
func (s *Solver) playShaped(i int) error {
	if done, err := s.playPeriodic(i); done {
		return err
	}
	st := &s.stretches[i]
	c := &s.clock
	n := s.l.n
	f := field{st, s.theta, s.dtheta}
	start := c.now
	err := s.shaped.run(s.ctx, s.l, &f, s.x, s.k, st.Lasts, s.perTime*st.Lasts, &s.stats, func(from, step float64, p within) error {
		end := start + from + step
		if from+step >= st.Lasts {
			end = start + st.Lasts
		}
		for c.due(end) {
			tau := math.Max(c.at(c.next)-start-from, 0)
			p.at(s.out, tau)
			s.l.setTrace(s.out[:n], s.trace)
			fraction, slid := c.fraction(c.next), false
			for j := 0; j < s.k; j++ {
				d := fraction*c.dtotal[j] - c.dnow[j]
				if d == 0 {
					continue
				}
				if !slid {
					p.slopeAt(s.y, tau)
					slid = true
				}
				for i := 0; i < n; i++ {
					s.out[(1+j)*n+i] += s.y[i] * d
				}
			}
			s.guard(s.out[:n])
			if err := s.handOut(); err != nil {
				return err
			}
		}
		return nil
	})
	s.watch = math.Inf(1)
	if err != nil {
		return err
	}
	s.limited(s.shaped.taylor.rounded)
	if s.slides(st) {
		w := &s.shaped.taylor
		w.coefficients(&f, st.Lasts, 0)
		s.l.times(s.y[:n], w.vals, s.x[:n])
		for i := range w.driven {
			w.driven[i].add(s.y[:n], s.x[:n], w.driven[i].f[0])
		}
		for j := range st.Slopes {
			if d := st.Slopes[j].Lasts; d != 0 {
				for i, v := range s.y[:n] {
					s.x[(1+j)*n+i] += v * d
				}
			}
		}
	}
	s.pass(st)
	return nil
}

// handDuring hands out the state at the next sample's time within a constant
// stretch.
func (s *Solver) handDuring(st *Stretch) error {
	c := &s.clock
	n := s.l.n
	s.keep()
	copy(s.out, s.x)
	slid := false
	fraction := c.fraction(c.next)
	for j := 0; j < s.k; j++ {
		d := fraction*c.dtotal[j] - c.dnow[j]
		if d == 0 {
			continue
		}
		if !slid {
			s.l.generator(s.needVals(), st.Coef)
			s.l.times(s.y[:n], s.vals, s.x[:n])
			slid = true
		}
		for i, v := range s.y[:n] {
			s.out[(1+j)*n+i] += v * d
		}
	}
	return s.handOut()
}

// handRest hands out the state for all samples that are left.
func (s *Solver) handRest() error {
	s.keep()
	for s.clock.next < s.clock.samples {
		copy(s.out, s.x)
		if err := s.handOut(); err != nil {
			return err
		}
	}
	return nil
}

func (s *Solver) handOut() error {
	s.clock.next++
	return s.deliver(s.clock.next - 1)
}

var errNotFinite = errors.New("lindblad: the state is no longer finite: a coefficient is too large")

// deliver checks the state in s.out and emits it.
func (s *Solver) deliver(sample int) error {
	n := s.l.n
	if !allFinite(s.out[:(1+s.k)*n]) {
		return errNotFinite
	}
	return s.emit(sample, s.out[:n], s.dx)
}
