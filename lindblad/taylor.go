package lindblad

import "math"

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
	piece  int
	rows   []int32 // row numbers
	start  []int32 // entries of each
	col    []int32
	val    []float64
	f      []float64   // series of the coefficient
	df     [][]float64 // and of its slopes
	sloped []bool      // whether there are any
	w      []float64   // L_m c_p for all parts, rows and p
}

type taylor struct {
	l       *Layout
	k       int         // directions
	vals    []float64   // L₀ on the pattern
	dvals   [][]float64 // slopes, nil: zero
	driven  []driven
	poly    polynomial // the series at the start of the step
	next    []float64  // the state at its end
	rounded float64    // error of steps that rounding limits
	slope   []float64
	spare   []float64
	series  [4][maxOrder + 1]float64
}

var logFactorial = func() (c [maxOrder + 1]float64) {
	for i := 1; i < len(c); i++ {
		c[i] = c[i-1] + math.Log(float64(i))
	}
	return
}()

// bestOrder returns the order that makes the most progress per multiplication
// when a step may err by tolerance: order K reaches h with (h‖L‖)^{K+1}/(K+1)!
// of that size.
func bestOrder(tolerance float64, cost func(order int) float64) int {
	best, most := 0, 0.0
	log := math.Log(tolerance)
	for k := 6; k < maxOrder; k++ {
		h := math.Exp((log + logFactorial[k+1]) / float64(k+1))
		if v := math.Min(h, 0.7*float64(k)) / cost(k); v > most {
			best, most = k, v
		}
	}
	return best
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
		d := w.drivenBy(term.Piece)
		e, co, si := w.series[0][:order+1], w.series[1][:order+1], w.series[2][:order+1]
		if term.Envelope == nil {
			clear(e)
			e[0] = 1
		} else {
			term.Envelope.(Series).Taylor(t, e)
		}
		w.rotation(f, term, t, co, si)
		multiplyAdd(d.f, e, co, term.Amplitude)
		for j := range f.stretch.Slopes {
			s := &f.stretch.Slopes[j]
			var ts TermSlope
			if s.Terms != nil {
				ts = s.Terms[m]
			}
			if !d.sloped[j] {
				continue
			}
			df := d.df[j]
			if ts.Amplitude != 0 {
				multiplyAdd(df, e, co, ts.Amplitude)
			}
			if ts.Envelope != nil {
				de := w.series[3][:order+1]
				ts.Envelope.(Series).Taylor(t, de)
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
	}
}

// rotation gives the series of cos and sin of θ(t) + phase.
func (w *taylor) rotation(f *field, term *Term, t float64, co, si []float64) {
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
func (w *taylor) prepare(l *Layout, s *Stretch, k int) {
	w.l, w.k = l, k
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
		d.w = sized(d.w, (1+k)*len(d.rows)*(maxOrder+1))
		d.sloped = zeroed(d.sloped, k)
	}
	w.poly.reset((1+k)*l.n, maxOrder)
	w.next, w.slope, w.spare = sized(w.next, (1+k)*l.n), sized(w.slope, (1+k)*l.n), sized(w.spare, l.n)
	for j := range s.Slopes {
		for m, t := range s.Terms {
			if s.slopeMatters(j, m) {
				w.drivenBy(t.Piece).sloped[j] = true
			}
		}
	}
}

func (w *taylor) drivenBy(piece int) *driven {
	for i := range w.driven {
		if w.driven[i].piece == piece {
			return &w.driven[i]
		}
	}
	panic("lindblad: a term without its piece")
}

// slopeMatters tells whether term m may depend on direction j. The phase of a
// rotor may always have moved.
func (s *Stretch) slopeMatters(j, m int) bool {
	if s.Terms[m].Rotor >= 0 {
		return true
	}
	d := s.Slopes[j].Terms
	return d != nil && (d[m].Amplitude != 0 || d[m].Phase != 0 || d[m].Envelope != nil)
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

// expand computes the coefficients c_1 … c_order of p from its c_0, for the
// series that coefficients has left.
func (w *taylor) expand(p *polynomial, order int) {
	n := w.l.n
	block := p.block
	p.order, p.scale = order, 1
	for i := 0; i < order; i++ {
		now, next := p.c[i*block:(i+1)*block], p.c[(i+1)*block:(i+2)*block]
		for q := 0; q <= w.k; q++ {
			y := next[q*n : (q+1)*n]
			w.l.times(y, w.vals, now[q*n:(q+1)*n])
			if q > 0 && len(w.dvals[q-1]) > 0 {
				w.l.addTimes(y, w.dvals[q-1], now[:n])
			}
			for j := range w.driven {
				w.driven[j].convolve(y, now, i, q, w.k, n)
			}
		}
		f := 1 / float64(i+1)
		for j := range next {
			next[j] *= f
		}
	}
}

// convolve adds Σ_i f_i L_m c_{p−i} to y, part q; the products L_m c_p are kept
// newest last, so that both factors run forwards.
func (d *driven) convolve(y, now []float64, p, q, k, n int) {
	m := len(d.rows)
	const long = maxOrder + 1
	w := d.w[q*m*long : (q+1)*m*long]
	x := now[q*n : (q+1)*n]
	f := d.f[:p+1]
	for r := 0; r < m; r++ {
		var s float64
		from, to := d.start[r], d.start[r+1]
		col := d.col[from:to]
		for e, v := range d.val[from:to] {
			s += v * x[col[e]]
		}
		at := r*long + maxOrder - p
		w[at] = s
		y[d.rows[r]] += dot(f, w[at:at+p+1])
	}
	if q > 0 && d.sloped[q-1] {
		w, f := d.w[:m*long], d.df[q-1][:p+1]
		for r := 0; r < m; r++ {
			at := r*long + maxOrder - p
			y[d.rows[r]] += dot(f, w[at:at+p+1])
		}
	}
}

func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s, u float64
	i := 0
	for ; i+1 < len(a); i += 2 {
		s += a[i] * b[i]
		u += a[i+1] * b[i+1]
	}
	if i < len(a) {
		s += a[i] * b[i]
	}
	return s + u
}

// step proposes a step from the last coefficients: the first one left out is
// taken to continue the ratio of the last ones.
func (w *taylor) step(perTime float64) float64 {
	h := math.Inf(1)
	k := w.poly.order
	n := w.l.n
	for q := 0; q <= w.k; q++ {
		a, b, c := largest(w.poly.part(k-2, q, n)), largest(w.poly.part(k-1, q, n)), largest(w.poly.part(k, q, n))
		if c != c {
			return 0
		}
		ratio := math.Max(c/math.Max(b, 1e-300), math.Max(b/math.Max(a, 1e-300), math.Sqrt(c/math.Max(a, 1e-300))))
		if a == 0 && b == 0 && c == 0 {
			continue
		}
		last := math.Max(c, b*ratio/2)
		scale := 1.0
		if q > 0 {
			// A tangent may set out from zero, and slowly: its size is that of
			// its largest term within the step that the state allows.
			scale = largest(w.poly.part(0, q, n))
			if f := h; !math.IsInf(h, 1) {
				for p := 1; p < k && f > 0; p++ {
					scale = math.Max(scale, f*largest(w.poly.part(p, q, n)))
					f *= h
				}
			}
			if scale == 0 {
				continue
			}
		}
		if b < 0.05*math.Sqrt(a*c) || a == 0 || c < 1e-3*b*b/a {
			h = math.Min(h, w.stepByRoots(q, perTime*scale, scale))
			continue
		}
		h = math.Min(h, math.Min(0.9*math.Pow(perTime*scale/(last*ratio), 1/float64(k)), 0.7/ratio))
	}
	return h
}

// stepByRoots is the step for a series with gaps (a state that sets out along
// a symmetry has them): each of the last orders p that is there must by itself
// keep p·c_p·h^(p−1) small.
func (w *taylor) stepByRoots(q int, perTime, scale float64) float64 {
	h := math.Inf(1)
	k := w.poly.order
	for p := max(2, k-7); p <= k; p++ {
		if c := largest(w.poly.part(p, q, w.l.n)); c > 0 {
			h = math.Min(h, math.Min(0.9*math.Pow(perTime/(float64(p)*c), 1/float64(p-1)), 0.7*math.Pow(scale/c, 1/float64(p))))
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
		y := w.spare
		w.l.times(y, w.vals, x)
		if q > 0 && len(w.dvals[q-1]) > 0 {
			w.l.addTimes(y, w.dvals[q-1], w.next[:n])
		}
		for i := range w.driven {
			w.driven[i].add(y, x, w.driven[i].f[0])
			if q > 0 && w.driven[i].sloped[q-1] {
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

func (l *Layout) trace(x []float64) float64 {
	var s float64
	for _, p := range l.pops {
		s += x[p]
	}
	return s
}

// setTrace takes back what rounding did to the sum of the populations.
func (l *Layout) setTrace(x []float64, trace float64) {
	off := l.trace(x) - trace
	if math.Abs(off) <= 2e-16 {
		return
	}
	var most float64
	at := -1
	for _, p := range l.pops {
		if v := math.Abs(x[p]); v > most {
			most, at = v, int(p)
		}
	}
	if at >= 0 {
		x[at] -= off
	}
}
