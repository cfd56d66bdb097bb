package lindblad

import (
	"context"
	"fmt"
	"math"
)

// Taylor's method in time. Within a step, x(t+τ) = Σ c_p τ^p with
//
//	(p+1) c_{p+1} = L₀ c_p + Σ_m Σ_i f_{m,i} L_m c_{p−i}
//
// for dx/dt = (L₀ + Σ_m f_m(t) L_m) x, f_{m,i} the Taylor coefficients of f_m.
// Tangents x_j obey x_j' = L x_j + (∂_j L) x and ride along. The step follows
// from the last coefficients; it is accepted when the defect at its end, the
// difference between the polynomial's slope and L x there (evaluated through
// the envelope's value, not its series), is small enough. The population sum
// is conserved because every L_m conserves it; rounding is taken back.
//
// With no f_m this is the action of the exponential on a vector.

const maxOrder = 30

// driven is one piece that depends on time: its rows on the pattern and its
// series.
type driven struct {
	piece int
	rows  []int32 // row numbers
	start []int32 // entries of each
	col   []int32
	val   []float64
	f     []float64   // series of the coefficient
	df    [][]float64 // and of its slopes
	w     []float64   // L_m c_p for all p, parts and rows
}

type taylor struct {
	l      *Layout
	k      int // directions
	order  int
	vals   []float64   // L₀ on the pattern
	dvals  [][]float64 // slopes, nil: zero
	driven []driven
	c      []float64 // coefficients: order+1 blocks of (1+k)·n
	next   []float64
	slope  []float64
	series [4][maxOrder + 1]float64
	bounds []float64 // entries of the abs row sums, for a first step
}

// orderFor returns the order that takes the fewest products per unit of time.
func orderFor(accuracy float64) int {
	p := int(3 + 0.55*math.Log(1/accuracy))
	return min(max(p, 8), maxOrder-1)
}

// field evaluates series of the terms of a stretch.
type field struct {
	stretch *Stretch
	theta   []float64   // phases of the rotors at the stretch's start
	dtheta  [][]float64 // their slopes
}

// coefficients puts the Taylor series at time t into every driven piece.
func (w *taylor) coefficients(f *field, t float64, order int) {
	for i := range w.driven {
		d := &w.driven[i]
		clear(d.f[:order+1])
		for j := range d.df {
			clear(d.df[j][:order+1])
		}
	}
	for m := range f.stretch.Terms {
		term := &f.stretch.Terms[m]
		var d *driven
		for i := range w.driven {
			if w.driven[i].piece == term.Piece {
				d = &w.driven[i]
			}
		}
		e, co, si := w.series[0][:order+1], w.series[1][:order+1], w.series[2][:order+1]
		if term.Envelope == nil {
			clear(e)
			e[0] = 1
		} else {
			term.Envelope.Taylor(t, e)
		}
		omega := w.rotation(f, term, t, co, si)
		multiplyAdd(d.f, e, co, term.Amplitude)
		for j := range f.stretch.Slopes {
			s := &f.stretch.Slopes[j]
			var ts TermSlope
			if s.Terms != nil {
				ts = s.Terms[m]
			}
			df := d.df[j]
			if ts.Amplitude != 0 {
				multiplyAdd(df, e, co, ts.Amplitude)
			}
			if ts.Envelope != nil {
				de := w.series[3][:order+1]
				ts.Envelope.Taylor(t, de)
				multiplyAdd(df, de, co, term.Amplitude)
			}
			phase, rate := ts.Phase, 0.0
			if term.Rotor >= 0 {
				phase += f.dtheta[j][term.Rotor]
				if s.Rotors != nil {
					rate = s.Rotors[term.Rotor]
				}
			}
			phase += rate * t
			if phase != 0 || rate != 0 {
				// −A e sin(θ) (phase + rate τ)
				de := w.series[3][:order+1]
				for p := range de {
					de[p] = phase * e[p]
					if p > 0 {
						de[p] += rate * e[p-1]
					}
				}
				multiplyAdd(df, de, si, -term.Amplitude)
			}
		}
		_ = omega
	}
}

// rotation gives the series of cos and sin of θ(t) + phase.
func (w *taylor) rotation(f *field, term *Term, t float64, co, si []float64) float64 {
	theta, omega := term.Phase, 0.0
	if term.Rotor >= 0 {
		theta += f.theta[term.Rotor]
		if f.stretch.Rotors != nil {
			omega = f.stretch.Rotors[term.Rotor]
			theta += turn(omega, t)
		}
	}
	s, c := math.Sincos(theta)
	power := 1.0
	for p := range co {
		switch p % 4 {
		case 0:
			co[p], si[p] = c*power, s*power
		case 1:
			co[p], si[p] = -s*power, c*power
		case 2:
			co[p], si[p] = -c*power, -s*power
		default:
			co[p], si[p] = s*power, -c*power
		}
		power *= omega / float64(p+1)
	}
	return omega
}

// turn returns ωt less a whole number of turns, without losing the digits of
// ωt to its size.
func turn(omega, t float64) float64 {
	p := omega * t
	low := math.FMA(omega, t, -p)
	return math.Remainder(p, 2*math.Pi) + low - math.Round(p/(2*math.Pi))*2.4492935982947064e-16
}

// multiplyAdd adds a·b·v to c, as series.
func multiplyAdd(c, a, b []float64, v float64) {
	for i, x := range a {
		if x == 0 {
			continue
		}
		x *= v
		for j := 0; i+j < len(a); j++ {
			c[i+j] += x * b[j]
		}
	}
}

// prepare lays out the driven pieces of a stretch.
func (w *taylor) prepare(l *Layout, s *Stretch, k, order int) {
	w.l, w.k, w.order = l, k, order
	w.vals = sized(w.vals, len(l.col))
	l.generator(w.vals, s.Coef)
	w.dvals = sized(w.dvals, k)
	for j := range w.dvals {
		if j < len(s.Slopes) && anyNonZero(s.Slopes[j].Coef) {
			w.dvals[j] = sized(w.dvals[j], len(l.col))
			l.generator(w.dvals[j], s.Slopes[j].Coef)
		} else {
			w.dvals[j] = w.dvals[j][:0]
		}
	}
	w.driven = w.driven[:0]
	for _, t := range s.Terms {
		there := false
		for i := range w.driven {
			there = there || w.driven[i].piece == t.Piece
		}
		if there {
			continue
		}
		if len(w.driven) < cap(w.driven) {
			w.driven = w.driven[:len(w.driven)+1]
		} else {
			w.driven = append(w.driven, driven{})
		}
		d := &w.driven[len(w.driven)-1]
		d.piece = t.Piece
		d.f = sized(d.f, maxOrder+1)
		d.df = sized(d.df, k)
		for j := range d.df {
			d.df[j] = zeroed(d.df[j], maxOrder+1)
		}
		d.lay(l, t.Piece)
		d.w = sized(d.w, (order+1)*(1+k)*len(d.rows))
	}
	w.c = sized(w.c, (order+2)*(1+k)*l.n)
	w.next, w.slope = sized(w.next, (1+k)*l.n), sized(w.slope, (1+k)*l.n)
}

func anyNonZero(x []float64) bool {
	for _, v := range x {
		if v != 0 {
			return true
		}
	}
	return false
}

func (d *driven) lay(l *Layout, piece int) {
	d.rows, d.start, d.col, d.val = d.rows[:0], append(d.start[:0], 0), d.col[:0], d.val[:0]
	p := &l.pieces[piece]
	row := 0
	for i, at := range p.at {
		for l.start[row+1] <= at {
			row++
		}
		if len(d.rows) == 0 || d.rows[len(d.rows)-1] != int32(row) {
			d.rows = append(d.rows, int32(row))
			d.start = append(d.start, 0)
		}
		d.col = append(d.col, l.col[at])
		d.val = append(d.val, p.val[i])
		d.start[len(d.start)-1] = int32(len(d.col))
	}
}

// expand computes the coefficients c_1 … c_order from c_0.
func (w *taylor) expand(stretch *Stretch) {
	n := w.l.n
	block := (1 + w.k) * n
	for p := 0; p < w.order; p++ {
		now, next := w.c[p*block:(p+1)*block], w.c[(p+1)*block:(p+2)*block]
		for q := 0; q <= w.k; q++ {
			y := next[q*n : (q+1)*n]
			w.l.times(y, w.vals, now[q*n:(q+1)*n])
			if q > 0 && len(w.dvals[q-1]) > 0 {
				w.l.addTimes(y, w.dvals[q-1], now[:n])
			}
			for i := range w.driven {
				w.driven[i].convolve(y, now, p, q, w.k, n, q > 0 && q <= len(stretch.Slopes))
			}
		}
		f := 1 / float64(p+1)
		for i := range next {
			next[i] *= f
		}
	}
}

func (d *driven) convolve(y, now []float64, p, q, k, n int, sloped bool) {
	m := len(d.rows)
	stride := (1 + k) * m
	w := d.w[p*stride+q*m:]
	x := now[q*n : (q+1)*n]
	for r := 0; r < m; r++ {
		var s float64
		for e := d.start[r]; e < d.start[r+1]; e++ {
			s += d.val[e] * x[d.col[e]]
		}
		w[r] = s
	}
	for i := 0; i <= p; i++ {
		if f := d.f[i]; f != 0 {
			w := d.w[(p-i)*stride+q*m : (p-i)*stride+q*m+m]
			for r, v := range w {
				y[d.rows[r]] += f * v
			}
		}
		if sloped {
			if f := d.df[q-1][i]; f != 0 {
				w := d.w[(p-i)*stride : (p-i)*stride+m]
				for r, v := range w {
					y[d.rows[r]] += f * v
				}
			}
		}
	}
}

// largest returns the largest absolute value of part q of coefficient p.
func (w *taylor) largest(p, q int) float64 {
	n := w.l.n
	var most float64
	for _, v := range w.c[(p*(1+w.k)+q)*n : (p*(1+w.k)+q)*n+n] {
		if v = math.Abs(v); !(v <= most) {
			most = v
		}
	}
	return most
}

// at evaluates the polynomial at τ into y.
func (w *taylor) at(y []float64, tau float64) {
	block := (1 + w.k) * w.l.n
	copy(y[:block], w.c[w.order*block:(w.order+1)*block])
	for p := w.order - 1; p >= 0; p-- {
		c := w.c[p*block : (p+1)*block]
		for i, v := range c {
			y[i] = y[i]*tau + v
		}
	}
}

// slopeAt evaluates the derivative of the polynomial.
func (w *taylor) slopeAt(y []float64, tau float64) {
	block := (1 + w.k) * w.l.n
	for i, v := range w.c[w.order*block : (w.order+1)*block] {
		y[i] = v * float64(w.order)
	}
	for p := w.order - 1; p >= 1; p-- {
		c := w.c[p*block : (p+1)*block]
		f := float64(p)
		for i, v := range c {
			y[i] = y[i]*tau + f*v
		}
	}
}

// integrate carries x (1 + k parts) through the stretch. visit is called for
// each step with the step's start and length before x moves on; it may
// evaluate at and slopeAt in between.
func (w *taylor) integrate(ctx context.Context, f *field, x []float64, lasts, accuracy float64, stats *Stats, visit func(from, step float64) error) error {
	l := w.l
	n := l.n
	block := (1 + w.k) * n
	perTime := accuracy / lasts
	t := 0.0
	trace := make([]float64, 1+w.k)
	for q := range trace {
		trace[q] = l.trace(x[q*n:])
	}
	limit := math.Inf(1)
	copy(w.c, x[:block])
	for count := 0; t < lasts; count++ {
		if count%64 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		w.coefficients(f, t, w.order)
		w.expand(f.stretch)
		stats.Steps++
		stats.Products += w.order
		rest := math.Min(lasts, f.breakAfter(t, lasts)) - t
		h := math.Min(math.Min(w.step(perTime), limit), rest)
		for {
			if !(h > 1e-15*lasts) {
				return fmt.Errorf("lindblad: the step became too small at time %g of a stretch of %g: an envelope is not smooth there or a value is not finite", t, lasts)
			}
			w.at(w.next, h)
			w.slopeAt(w.slope, h)
			if w.defect(f, t+h) <= perTime*float64(w.order) {
				break
			}
			stats.Rejected++
			h *= 0.7
		}
		limit = 3 * h
		if err := visit(t, h); err != nil {
			return err
		}
		copy(w.c[:block], w.next)
		if h == rest {
			t = math.Min(lasts, f.breakAfter(t, lasts))
		} else {
			t += h
		}
		for q := range trace {
			l.setTrace(w.c[q*n:(q+1)*n], trace[q])
		}
	}
	copy(x, w.c[:block])
	return nil
}

// breakAfter returns the first break of an envelope after t, at most end.
func (f *field) breakAfter(t, end float64) float64 {
	for i := range f.stretch.Terms {
		if b, ok := f.stretch.Terms[i].Envelope.(Broken); ok {
			if u := b.NextBreak(t); u > t && u < end {
				end = u
			}
		}
	}
	return end
}

// step proposes a step from the last coefficients, for an error per time.
func (w *taylor) step(perTime float64) float64 {
	h := math.Inf(1)
	for q := 0; q <= w.k; q++ {
		scale := 1.0
		if q > 0 {
			scale = math.Max(w.largest(0, q), 1e-300)
			if !math.IsInf(h, 1) {
				scale = math.Max(scale, h*w.largest(1, q))
			}
		}
		for p := w.order - 1; p <= w.order; p++ {
			if c := w.largest(p, q); c > 0 {
				h = math.Min(h, math.Pow(perTime*scale/c, 1/float64(p-1)))
			} else if c != c {
				return 0
			}
		}
	}
	return h
}

// defect returns the largest difference between the polynomial's slope and
// L x at time t, tangents relative to their size.
func (w *taylor) defect(f *field, t float64) float64 {
	n := w.l.n
	w.coefficients(f, t, 0)
	var most float64
	for q := 0; q <= w.k; q++ {
		x, s := w.next[q*n:(q+1)*n], w.slope[q*n:(q+1)*n]
		var size, worst float64
		y := w.c[(w.order+1)*(1+w.k)*n:][:n]
		w.l.times(y, w.vals, x)
		if q > 0 && len(w.dvals[q-1]) > 0 {
			w.l.addTimes(y, w.dvals[q-1], w.next[:n])
		}
		for i := range w.driven {
			w.driven[i].add(y, x, w.driven[i].f[0])
			if q > 0 && q <= len(f.stretch.Slopes) {
				w.driven[i].add(y, w.next[:n], w.driven[i].df[q-1][0])
			}
		}
		for i := range y {
			worst = math.Max(worst, math.Abs(y[i]-s[i]))
			size = math.Max(size, math.Abs(x[i]))
		}
		if q > 0 && size > 0 {
			worst /= size
		}
		most = math.Max(most, worst)
		if worst != worst {
			return math.Inf(1)
		}
	}
	return most
}

func (d *driven) add(y, x []float64, f float64) {
	if f == 0 {
		return
	}
	for r, row := range d.rows {
		var s float64
		for e := d.start[r]; e < d.start[r+1]; e++ {
			s += d.val[e] * x[d.col[e]]
		}
		y[row] += f * s
	}
}

// addTimes sets y += Lx.
func (l *Layout) addTimes(y, vals, x []float64) {
	for i := 0; i < l.n; i++ {
		var s float64
		for e := l.start[i]; e < l.start[i+1]; e++ {
			s += vals[e] * x[l.col[e]]
		}
		y[i] += s
	}
}

func (l *Layout) trace(x []float64) float64 {
	var s float64
	for _, p := range l.pops {
		s += x[p]
	}
	return s
}

// setTrace takes back what rounding did to the sum of the populations.
func (l *Layout) setTrace(x []float64, trace float64) {
	var most float64
	at := -1
	for _, p := range l.pops {
		if v := math.Abs(x[p]); v > most {
			most, at = v, int(p)
		}
	}
	if at >= 0 {
		x[at] -= l.trace(x) - trace
	}
}
