package lindblad

import "math"

// A stretch whose terms are all of constant size, with rotors of commensurate
// frequencies, repeats itself. Its propagators over the cells of one period
// (as many as the sample times need) are integrated once, column by column;
// then the state goes from sample to sample, or over whole periods, by
// products.
type periodic struct {
	columns shaped
	cells   []full // over equal parts of the period, from the stretch's start on
	strides []propagator
	x       []float64
	theta   []float64
}

const (
	mostCells   = 16 // of a period
	mostPeriods = 16 // of the slowest rotor in the common period
)

// period returns the common period of the stretch's rotors, 0 when there is
// none. Whatever is not quite commensurate must not show within the stretch.
func (s *Solver) period(st *Stretch) float64 {
	slow := math.Inf(1)
	for i := range st.Terms {
		t := &st.Terms[i]
		if t.Envelope != nil {
			return 0
		}
		if t.Rotor >= 0 && st.Rotors != nil {
			if w := math.Abs(st.Rotors[t.Rotor]); w > 0 {
				slow = math.Min(slow, w)
			}
		}
	}
	if math.IsInf(slow, 1) {
		return 0
	}
	allowed := math.Max(1e-4*s.accuracy, 4e-16*slow*st.Lasts)
	for turns := 1; turns <= mostPeriods; turns++ {
		period := 2 * math.Pi * float64(turns) / slow
		fits := true
		for i := range st.Terms {
			if t := &st.Terms[i]; t.Rotor >= 0 {
				cycles := st.Rotors[t.Rotor] * period / (2 * math.Pi)
				off := math.Abs(cycles-math.Round(cycles)) * 2 * math.Pi * st.Lasts / period
				fits = fits && off <= math.Max(allowed, 1e-15*math.Abs(st.Rotors[t.Rotor])*st.Lasts)
			}
		}
		if fits {
			return period
		}
	}
	return 0
}

// cellsFor returns how many cells of the period make each step between samples
// a whole number of cells, 0 when none of few do.
func cellsFor(step, period, lasts float64) (cells, perStep int) {
	for cells = 1; cells <= mostCells; cells++ {
		p := step / period * float64(cells)
		if r := math.Round(p); r >= 1 && math.Abs(p-r)*lasts/step <= 1e-13*p*lasts/step+1e-15 && r < 1e9 {
			return cells, int(r)
		}
	}
	return 0, 0
}

// playPeriodic plays a shaped stretch by whole cells when it repeats itself
// often enough; otherwise it does nothing and returns false.
func (s *Solver) playPeriodic(i int) (bool, error) {
	st := &s.stretches[i]
	n := s.l.n
	if s.k > 0 || n > implicitSize {
		return false, nil
	}
	period := s.period(st)
	if period == 0 || st.Lasts < float64(2*n)*period {
		return false, nil
	}
	c := &s.clock
	start := c.now
	last := c.lastBefore(start + st.Lasts)
	if c.next > last {
		// no sample inside: whole periods, then the rest
		whole := int(st.Lasts / period)
		if err := s.layCells(st, 0, period, 1); err != nil {
			return true, err
		}
		p := s.pe.power(s, whole)
		s.apply(p)
		s.watch = math.Inf(1)
		if err := s.part(st, float64(whole)*period, st.Lasts); err != nil {
			return true, err
		}
		s.pass(st)
		return true, nil
	}
	cells, perStep := cellsFor(c.step, period, st.Lasts)
	if cells == 0 || c.times != nil || float64(last-c.next) < float64(2*n*cells) {
		return false, nil
	}
	first := math.Max(c.at(c.next)-start, 0)
	if first <= c.same {
		first = 0
	}
	if err := s.part(st, 0, first); err != nil {
		return true, err
	}
	if err := s.layCells(st, first, period/float64(cells), cells); err != nil {
		return true, err
	}
	s.pe.layStrides(s, cells, perStep)
	if err := s.handDuring(st); err != nil {
		return true, err
	}
	for j := 0; c.next <= last; j++ {
		p := &s.pe.strides[j%cells]
		s.apply(p)
		s.watch += p.worst
		s.keep()
		if err := s.emit(c.next, s.x[:n], s.dx); err != nil {
			return true, err
		}
		c.next++
	}
	if err := s.part(st, c.at(last)-start, st.Lasts); err != nil {
		return true, err
	}
	s.pass(st)
	return true, nil
}

// part integrates a part of a stretch without envelopes.
func (s *Solver) part(st *Stretch, from, to float64) error {
	if to-from <= s.clock.same && from > 0 || to <= from {
		return nil
	}
	f := field{st, s.pe.turned(s, st, from), s.dtheta}
	s.watch = math.Inf(1)
	return s.shaped.run(s.ctx, s.l, &f, s.x, s.k, to-from, s.perTime*(to-from), &s.stats, ignore)
}

func ignore(float64, float64, within) error { return nil }

// turned returns the phases of the rotors at a time within the stretch.
func (w *periodic) turned(s *Solver, st *Stretch, t float64) []float64 {
	w.theta = append(w.theta[:0], s.theta...)
	for r, omega := range st.Rotors {
		w.theta[r] += turn(omega, t)
	}
	return w.theta
}

// layCells integrates the propagators of the cells: the basis vectors ride
// along as if they were tangents of the first.
func (s *Solver) layCells(st *Stretch, from, length float64, cells int) error {
	w := &s.pe
	n := s.l.n
	w.cells = sized(w.cells, cells)
	w.x = sized(w.x, n*n)
	plain := *st
	plain.Slopes = nil
	for j := range w.cells {
		clear(w.x)
		for q := 0; q < n; q++ {
			w.x[q*n+q] = 1
		}
		f := field{&plain, w.turned(s, st, from+float64(j)*length), nil}
		accuracy := math.Max(s.perTime*length, 1e-15)
		if err := w.columns.run(s.ctx, s.l, &f, w.x, n-1, length, accuracy, &s.stats, ignore); err != nil {
			return err
		}
		cell := &w.cells[j]
		cell.reset(s.l, 0)
		clear(cell.a)
		for b := range cell.lo {
			cell.lo[b], cell.hi[b] = 0, int32(cell.m)
		}
		for q := 0; q < n; q++ {
			for i := 0; i < n; i++ {
				cell.a[i*cell.m+q] = w.x[q*n+i]
			}
			cell.a[q*cell.m+q]--
		}
		cell.conserve(s.l.pops, cell.spareRows(nil, s.l.pops))
	}
	return nil
}

// power is a number of whole periods, of one cell each.
func (w *periodic) power(s *Solver, whole int) *propagator {
	m, p := new(full), &w.cells[0]
	for r := whole; r > 0; r >>= 1 {
		if r&1 == 1 {
			m = s.chain(p, m)
		}
		if r > 1 {
			p = s.chain(p, p)
		}
	}
	return &propagator{q: *m}
}

// layStrides multiplies cells to the propagators from each sample to the next.
func (w *periodic) layStrides(s *Solver, cells, perStep int) {
	w.strides = sized(w.strides, cells)
	for j := range w.strides {
		from := j * perStep % cells
		m := &w.cells[from]
		if perStep >= 2*cells { // whole periods first
			one := m
			for i := 1; i < cells; i++ {
				one = s.chain(&w.cells[(from+i)%cells], one)
			}
			m = new(full)
			for r := perStep / cells; r > 0; r >>= 1 {
				if r&1 == 1 {
					m = s.chain(one, m)
				}
				if r > 1 {
					one = s.chain(one, one)
				}
			}
			for i := 0; i < perStep%cells; i++ {
				m = s.chain(&w.cells[(from+i)%cells], m)
			}
		} else {
			for i := 1; i < perStep; i++ {
				m = s.chain(&w.cells[(from+i)%cells], m)
			}
		}
		p := &w.strides[j]
		p.q.copyFrom(m)
		p.worst = math.Max(rounding(s.l.n, 4), s.perTime*s.clock.step)
	}
}
