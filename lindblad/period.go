package lindblad

import (
	"fmt"
	"math"
)

// A stretch whose terms are all of constant size, with rotors of commensurate
// frequencies, repeats itself. Its propagators over the cells of one period
// (as many as the sample times need) are computed once;
// then the state goes from sample to sample, or over whole periods, by
// products.
type periodic struct {
	columns shaped
	series  twoPoint // its matrices
	cells   []full   // over equal parts of the period, from the stretch's start on
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
		p := s.periods.power(s, whole)
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
	s.periods.layStrides(s, cells, perStep)
	if err := s.handDuring(st); err != nil {
		return true, err
	}
	j := 0
	for ; c.next <= last; j++ {
		p := &s.periods.strides[j%cells]
		s.apply(p)
		s.watch += p.worst
		s.keep()
		if err := s.emit(c.next, s.x[:n], s.dx); err != nil {
			return true, err
		}
		c.next++
	}
	if rest := st.Lasts - (c.at(last) - start); math.Abs(rest-c.step) <= c.same {
		p := &s.periods.strides[j%cells]
		s.apply(p)
		s.watch += p.worst
	} else if err := s.part(st, c.at(last)-start, st.Lasts); err != nil {
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
	f := field{st, s.periods.turned(s, st, from), s.dtheta}
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

// layCells computes the propagators of the cells.
func (s *Solver) layCells(st *Stretch, from, length float64, cells int) error {
	w := &s.periods
	w.cells = sized(w.cells, cells)
	plain := *st
	plain.Slopes = nil
	series := s.trigonometric(st)
	if series {
		w.prepareSeries(s, &plain, math.Max(s.perTime*length, 1e-15))
	}
	for j := range w.cells {
		f := field{&plain, w.turned(s, st, from+float64(j)*length), nil}
		accuracy := math.Max(s.perTime*length, 1e-15)
		var err error
		if series {
			err = w.cellBySeries(s, &w.cells[j], &f, length, accuracy)
		} else {
			err = w.cellByColumns(s, &w.cells[j], &f, length, accuracy)
		}
		if err != nil {
			return err
		}
		w.cells[j].conserve(s.l.pops, w.cells[j].spareRows(nil, s.l.pops))
	}
	return nil
}

// trigonometric tells whether the terms have no envelopes: the series of their
// coefficients then have no surprises.
func (s *Solver) trigonometric(st *Stretch) bool {
	for i := range st.Terms {
		if st.Terms[i].Envelope != nil {
			return false
		}
	}
	return true
}

// prepareSeries picks the order of the matrices' series.
func (w *periodic) prepareSeries(s *Solver, st *Stretch, accuracy float64) {
	l := s.l
	n := l.n
	a := &w.columns.taylor
	a.prepare(l, st, 0)
	drives := 0
	for i := range a.driven {
		drives += len(a.driven[i].val)
	}
	b := &w.series
	b.w = a
	b.m = bestOrder(0.1*accuracy, func(k int) float64 {
		return float64(k*len(l.col)) + float64(drives*k*k)/2 + float64(20*n)
	})
	b.mats, b.before = sized(b.mats, (b.m+1)*n*n), sized(b.before, (b.m+1)*n*n)
	b.layDrives()
}

// cellBySeries multiplies Taylor polynomials Σ N_p h^p, dN/dt = L N, N_0 = 1.
func (w *periodic) cellBySeries(s *Solver, cell *full, f *field, length, accuracy float64) error {
	l := s.l
	n := l.n
	a, b := &w.columns.taylor, &w.series
	cell.reset(l, 0)
	cell.fill()
	var q, r full
	q.reset(l, 0)
	q.fill()
	r.reset(l, 0)
	for t, steps := 0.0, 0; t < length; steps++ {
		if steps%64 == 0 && s.ctx.Err() != nil {
			return s.ctx.Err()
		}
		a.coefficients(f, t, b.m)
		b.matrices()
		h := math.Min(b.reach(accuracy/length), length-t)
		if !(h > 1e-15*length) {
			return fmt.Errorf("lindblad: the step became too small at time %g of a period of %g: a value is not finite", t, length)
		}
		for i := 0; i < n; i++ {
			row := q.a[i*q.m : i*q.m+n]
			clear(row)
			for p := b.m; p >= 1; p-- {
				for j, v := range b.mats[p*n*n+i*n:][:len(row)] {
					row[j] = (row[j] + v) * h
				}
			}
		}
		s.stats.Steps++
		s.stats.Products += b.m
		if t == 0 {
			copy(cell.a, q.a)
		} else { // the step after what was there
			r.fill()
			r.multiply(&q, cell)
			r.addTo(&q, 1)
			r.addTo(cell, 1)
			copy(cell.a, r.a)
		}
		if t += h; length-t < 1e-15*length {
			break
		}
	}
	return nil
}

// reach proposes a step from the last matrices: the first one left out is taken
// to continue their ratio.
func (b *twoPoint) reach(perTime float64) float64 {
	n := b.w.l.n
	size := func(p int) (most float64) { // largest sum of a row
		for i := 0; i < n; i++ {
			var sum float64
			for _, v := range b.mats[p*n*n+i*n:][:n] {
				sum += math.Abs(v)
			}
			most = math.Max(most, sum)
		}
		return most
	}
	x, y, z := size(b.m-2), size(b.m-1), size(b.m)
	if z != z {
		return 0
	}
	ratio := math.Max(math.Max(z/math.Max(y, 1e-300), y/math.Max(x, 1e-300)), 1e-300)
	last := math.Max(z, y*ratio/2)
	if last == 0 {
		return math.Inf(1)
	}
	return math.Min(0.9*math.Pow(perTime/(last*ratio), 1/float64(b.m)), 0.7/ratio)
}

// fill clears the matrix and opens its intervals.
func (x *full) fill() {
	clear(x.a)
	for b := range x.lo {
		x.lo[b], x.hi[b] = 0, int32(x.m)
	}
}

// cellByColumns integrates the basis vectors: they ride along as if they were
// tangents of the first.
func (w *periodic) cellByColumns(s *Solver, cell *full, f *field, length, accuracy float64) error {
	n := s.l.n
	w.x = zeroed(w.x, n*n)
	for q := 0; q < n; q++ {
		w.x[q*n+q] = 1
	}
	if err := w.columns.run(s.ctx, s.l, f, w.x, n-1, length, accuracy, &s.stats, ignore); err != nil {
		return err
	}
	cell.reset(s.l, 0)
	cell.fill()
	for q := 0; q < n; q++ {
		for i := 0; i < n; i++ {
			cell.a[i*cell.m+q] = w.x[q*n+i]
		}
		cell.a[q*cell.m+q]--
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
