package lindblad

import (
	"math"
	"unsafe"
)

// The two-point series (Hermite–Obreshkov, the diagonal Padé scheme for a
// generator that depends on time). With c_p(t) = x⁽ᵖ⁾(t)/p!,
//
//	Σ_p w_p (−h)^p c_p(t+h) = Σ_p w_p h^p c_p(t) + O(h^{2m+1}),
//	w_p = m! (2m−p)! / ((m−p)! (2m)!),  p = 0 … m.
//
// c_p(t+h) = N_p x(t+h), so x(t+h) solves a linear system; N_p are the Taylor
// coefficients of the matrix equation dN/dt = L N from N = 1. The scheme is
// stable for every decaying generator, however large h‖L‖ is. Its error is
// estimated by the residual of the same formula with m + 1, through the same
// factors. The estimated errors are carried along by the same steps: where the
// generator damps them, later steps may err more. Within the step the state is
// the polynomial that has all the derivatives of both ends.
type twoPoint struct {
	possible bool
	w        *taylor
	m        int
	weights  [2][]float64 // for m and m+1
	step     float64      // proposal for the next one
	ahead    polynomial   // series at the end of the step
	inside   hermite      // the state within the step
	mats     []float64    // N_0 … N_m at the end of the step, n×n each
	before   []float64    // and at its start, when it was the end of a step
	known    bool
	local    []float64 // estimated error of the step
	global   []float64 // of the steps before
	carried  float64   // size of errors that are no longer followed
	budget   float64
	lu       []float64
	pivot    []int
	drives   []drive
	byRow    []int32 // drives of each row
	terms    []rowTerm
	rows     []int32 // where the terms of each row begin
	coef     []float64
}

// roundingStep is an error that a step may have whatever was asked: rounding.
const roundingStep = 2e-15

// drive is one entry of a driven piece.
type drive struct {
	col   int32
	piece int32
	val   float64
}

func padeWeights(m int) []float64 {
	w := make([]float64, m+1)
	w[0] = 1
	for p := 1; p <= m; p++ {
		// of x⁽ᵖ⁾h^p: w_p/p!; the ratio of successive ones is (m−p+1)/((2m−p+1) p)
		w[p] = w[p-1] * float64(m-p+1) / float64(2*m-p+1)
	}
	return w
}

func (b *twoPoint) prepare(w *taylor, accuracy float64) {
	b.w = w
	if m := min(max(int(0.3*math.Log(1/accuracy)+1.5), 3), 8); m != b.m {
		b.m = m
		b.weights = [2][]float64{padeWeights(m), padeWeights(m + 1)}
		b.inside.reset(m)
	}
	b.step, b.carried, b.known = 0, 0, false
	n, block := w.l.n, (1+w.k)*w.l.n
	b.ahead.reset(block, maxOrder)
	b.mats, b.lu, b.pivot = sized(b.mats, (b.m+1)*n*n), sized(b.lu, n*n), sized(b.pivot, n)
	b.before = sized(b.before, (b.m+1)*n*n)
	b.local, b.global = sized(b.local, n), zeroed(b.global, n)
	b.budget = 0.4 * accuracy
	b.layDrives()
}

// layDrives sorts the entries of the driven pieces by rows and lays out the
// recursion of the matrices.
func (b *twoPoint) layDrives() {
	w := b.w
	n := w.l.n
	b.drives, b.byRow = b.drives[:0], append(b.byRow[:0], 0)
	for i := int32(0); i < int32(n); i++ {
		for j := range w.driven {
			d := &w.driven[j]
			for r, row := range d.rows {
				for e := d.start[r]; row == i && e < d.start[r+1]; e++ {
					b.drives = append(b.drives, drive{d.col[e], int32(j), d.val[e]})
				}
			}
		}
		b.byRow = append(b.byRow, int32(len(b.drives)))
	}
	b.lay()
}

// cost counts the multiplications of one step.
func (b *twoPoint) cost() float64 {
	if !b.possible {
		return 1
	}
	n, m := float64(b.w.l.n), float64(b.m)
	matrices := n * (m*(float64(len(b.w.vals))+2*n) + float64(len(b.drives))*m*(m-1)/2)
	return 0.3*matrices + n*n*n/2 + float64(2*b.w.k)*b.w.cost(b.m+1)/float64(1+b.w.k)
}

// take takes a step of at most longest from the series in w.poly to the state
// in w.next and the series in ahead; it returns the step.
func (b *twoPoint) take(f *field, t, longest, perTime float64, stats *Stats) (float64, error) {
	w := b.w
	n, m, k := w.l.n, b.m, w.k
	for tries := 0; tries < 60; tries++ {
		h := b.step
		if h >= longest || h > 0.8*longest && h < longest {
			h = longest
		} else if 2*h > longest {
			h = longest / 2
		}
		w.coefficients(f, endOf(t+h, h == longest), m+1)
		b.matrices()
		b.system(h)
		ok := b.factor()
		worst := math.Inf(1)
		if ok {
			stats.Products += m
			b.right(h)
			b.solve(w.next[:n])
			copy(b.ahead.c, w.next[:n])
			if k > 0 {
				// what the moved value alone does to the tangents
				clear(b.ahead.c[n : (1+k)*n])
				w.expand(&b.ahead, m)
				sign := 1.0
				for p := 1; p <= m; p++ {
					sign *= -h
					for q := 1; q <= k; q++ {
						x := w.next[q*n : (q+1)*n]
						for i, v := range b.ahead.part(p, q, n) {
							x[i] -= b.weights[0][p] * sign * v
						}
					}
				}
				for q := 1; q <= k; q++ {
					b.solve(w.next[q*n : (q+1)*n])
				}
				copy(b.ahead.c, w.next)
				w.expand(&b.ahead, m+1)
			} else {
				b.series()
			}
			worst = b.residual(h)
		}
		allowed := math.Max(0.3*perTime*h, roundingStep)
		if k == 0 {
			allowed += 0.3 * math.Max(0, b.budget-b.carried-largest(b.global))
		}
		grow := 3.0
		if worst > 0 {
			grow = math.Min(3, 0.9*math.Pow(allowed/worst, 1/float64(2*m+1)))
		}
		if worst <= allowed {
			if h < b.step { // cut by the end
				b.step = math.Max(b.step, h*grow)
			} else {
				b.step = h * grow
			}
			if worst > perTime*h {
				w.rounded += worst
			}
			b.inside.h, b.inside.start, b.inside.end = h, &w.poly, &b.ahead
			b.carry(h)
			return h, nil
		}
		stats.Rejected++
		if worst != worst || math.IsInf(worst, 1) {
			grow = 0.3
		}
		b.step = h * math.Max(math.Min(grow, 0.8), 0.2)
	}
	return 0, nil
}

// lay prepares the recursion (p+1) N_{p+1} = Σ_i L_i N_{p−i}, N_0 = 1: which
// rows of which matrices each row is the sum of, and where the factors stand in
// coef: the entries of L, then f_1 … f_m of every driven piece. Each row has an
// even number of terms.
func (b *twoPoint) lay() {
	w := b.w
	l := w.l
	n, m := l.n, b.m
	b.coef = sized(b.coef, len(w.vals)+m*len(w.driven))
	b.terms, b.rows = b.terms[:0], append(b.rows[:0], 0)
	for p := 0; p < m; p++ {
		g := 1 / float64(p+1)
		for i := 0; i < n; i++ {
			for e := l.start[i]; e < l.start[i+1]; e++ {
				b.terms = append(b.terms, rowTerm{int32(p*n + int(l.col[e])), e, g})
			}
			for _, d := range b.drives[b.byRow[i]:b.byRow[i+1]] {
				for q := 1; q <= p; q++ {
					b.terms = append(b.terms, rowTerm{int32((p-q)*n + int(d.col)), int32(len(w.vals) + m*int(d.piece) + q - 1), g * d.val})
				}
			}
			if (len(b.terms)-int(b.rows[len(b.rows)-1]))%2 == 1 {
				b.terms = append(b.terms, rowTerm{})
			}
			b.rows = append(b.rows, int32(len(b.terms)))
		}
	}
	for _, mats := range [][]float64{b.mats, b.before} {
		clear(mats[:n*n])
		addIdentity(mats, n)
	}
}

func addIdentity(a []float64, n int) {
	for i := 0; i < n; i++ {
		a[i*n+i]++
	}
}

// rowTerm is a multiple of a row of one of the matrices.
type rowTerm struct {
	at, coef int32
	factor   float64
}

// matrices computes N_1 … N_m for the series that coefficients has left.
func (b *twoPoint) matrices() {
	w := b.w
	n := w.l.n
	entries := len(w.vals)
	copy(b.coef, w.vals)
	for i := range w.driven {
		d := &w.driven[i]
		p := &w.l.pieces[d.piece]
		f := d.f[0]
		for e, at := range p.at {
			b.coef[at] += f * p.val[e]
		}
		copy(b.coef[entries+i*b.m:entries+(i+1)*b.m], d.f[1:])
	}
	out := b.mats[n*n:]
	var nine [][9]float64 // the rows of the matrices
	var four [][4]float64
	switch n {
	case 4:
		four = unsafe.Slice((*[4]float64)(b.mats), len(b.mats)/4)
	case 9:
		nine = unsafe.Slice((*[9]float64)(b.mats), len(b.mats)/9)
	}
	for r, from := range b.rows[:n*b.m] {
		terms := b.terms[from:b.rows[r+1]]
		row := out[r*n : r*n+n]
		if n == 9 {
			sumRows9((*[9]float64)(row), nine, terms, b.coef)
			continue
		}
		if n == 4 {
			sumRows4((*[4]float64)(row), four, terms, b.coef)
			continue
		}
		clear(row)
		for _, t := range terms {
			f := t.factor * b.coef[t.coef]
			for j, v := range b.mats[int(t.at)*n:][:len(row)] {
				row[j] += f * v
			}
		}
	}
}

// sumRows4 adds up terms.
func sumRows4(row *[4]float64, mats [][4]float64, terms []rowTerm, coef []float64) {
	var s0, s1, s2, s3 float64
	for i := 1; i < len(terms); i += 2 {
		t, u := &terms[i-1], &terms[i]
		x, y := &mats[t.at], &mats[u.at]
		f, g := t.factor*coef[t.coef], u.factor*coef[u.coef]
		s0 += f*x[0] + g*y[0]
		s1 += f*x[1] + g*y[1]
		s2 += f*x[2] + g*y[2]
		s3 += f*x[3] + g*y[3]
	}
	row[0], row[1], row[2], row[3] = s0, s1, s2, s3
}

// sumRows9 adds up terms, two at a time and the columns in two goes, so that
// the sums stay in registers.
func sumRows9(row *[9]float64, mats [][9]float64, terms []rowTerm, coef []float64) {
	var s0, s1, s2, s3, s4 float64
	for i := 1; i < len(terms); i += 2 {
		t, u := &terms[i-1], &terms[i]
		x, y := &mats[t.at], &mats[u.at]
		f, g := t.factor*coef[t.coef], u.factor*coef[u.coef]
		s0 += f*x[0] + g*y[0]
		s1 += f*x[1] + g*y[1]
		s2 += f*x[2] + g*y[2]
		s3 += f*x[3] + g*y[3]
		s4 += f*x[4] + g*y[4]
	}
	row[0], row[1], row[2], row[3], row[4] = s0, s1, s2, s3, s4
	s0, s1, s2, s3 = 0, 0, 0, 0
	for i := 1; i < len(terms); i += 2 {
		t, u := &terms[i-1], &terms[i]
		x, y := &mats[t.at], &mats[u.at]
		f, g := t.factor*coef[t.coef], u.factor*coef[u.coef]
		s0 += f*x[5] + g*y[5]
		s1 += f*x[6] + g*y[6]
		s2 += f*x[7] + g*y[7]
		s3 += f*x[8] + g*y[8]
	}
	row[5], row[6], row[7], row[8] = s0, s1, s2, s3
}

// series puts the coefficients of the state at the end of the step into ahead,
// from its c_0: c_p = N_p c_0 up to m, then one more by the recursion.
func (b *twoPoint) series() {
	w := b.w
	l := w.l
	n, m := l.n, b.m
	x := b.ahead.c[:n]
	for p := 1; p <= m; p++ {
		y := b.ahead.part(p, 0, n)
		a := b.mats[p*n*n : (p+1)*n*n]
		if n == 9 {
			clear(y)
			times9((*[9]float64)(y), (*[81]float64)(a), (*[9]float64)(x))
			continue
		}
		for i := range y {
			var s float64
			row := a[i*n : i*n+n]
			for j, v := range x {
				s += row[j] * v
			}
			y[i] = s
		}
	}
	last, y := b.ahead.part(m, 0, n), b.ahead.part(m+1, 0, n)
	g := 1 / float64(m+1)
	block := b.ahead.block
	for i := 0; i < n; i++ {
		var s float64
		for e := l.start[i]; e < l.start[i+1]; e++ {
			s += b.coef[e] * last[l.col[e]]
		}
		for _, d := range b.drives[b.byRow[i]:b.byRow[i+1]] {
			var u float64
			at := (m-1)*block + int(d.col)
			for _, f := range w.driven[d.piece].f[1 : m+1] {
				u += f * b.ahead.c[at]
				at -= block
			}
			s += d.val * u
		}
		y[i] = g * s
	}
}

// carry follows the error through the step: it decays or turns as the state
// does, and the step's own is added.
func (b *twoPoint) carry(h float64) {
	n := b.w.l.n
	if b.known {
		g := b.global
		e := b.w.spare
		copy(e, g)
		power := 1.0
		for p := 1; p <= b.m; p++ {
			power *= h
			f := b.weights[0][p] * power
			a := b.before[p*n*n : (p+1)*n*n]
			if n == 9 {
				var y [9]float64
				times9(&y, (*[81]float64)(a), (*[9]float64)(g))
				for i, v := range y {
					e[i] += f * v
				}
				continue
			}
			for i := range e {
				var s float64
				row := a[i*n : i*n+n]
				for j, v := range g {
					s += row[j] * v
				}
				e[i] += f * s
			}
		}
		b.solve(e)
		for i, v := range b.local {
			g[i] = e[i] + v
		}
	} else {
		b.forget()
		copy(b.global, b.local)
	}
	b.mats, b.before = b.before, b.mats
	b.known = true
}

// forget counts the error followed so far at its size.
func (b *twoPoint) forget() {
	b.carried += largest(b.global)
	clear(b.global)
	b.known = false
}

// system sets lu = Σ w_p (−h)^p N_p.
func (b *twoPoint) system(h float64) {
	n := b.w.l.n
	sign := -h
	for p := 1; p <= b.m; p++ {
		f := b.weights[0][p] * sign
		a := b.mats[p*n*n : (p+1)*n*n]
		lu := b.lu[:len(a)]
		if p == 1 {
			for i, v := range a {
				lu[i] = f * v
			}
		} else {
			for i, v := range a {
				lu[i] += f * v
			}
		}
		sign *= -h
	}
	for i := 0; i < n; i++ {
		b.lu[i*n+i]++
	}
}

// right sets next = Σ w_p h^p c_p(t).
func (b *twoPoint) right(h float64) {
	w := b.w
	copy(w.next, w.poly.c[:w.poly.block])
	power := 1.0
	for p := 1; p <= b.m; p++ {
		power *= h
		f := b.weights[0][p] * power
		for i, v := range w.poly.c[p*w.poly.block : (p+1)*w.poly.block] {
			w.next[i] += f * v
		}
	}
}

// factor replaces lu by its factors, with partial pivoting.
func (b *twoPoint) factor() bool { return factor(b.lu, b.pivot, b.w.l.n) }

func (b *twoPoint) solve(x []float64) { solve(b.lu, b.pivot, b.w.l.n, x) }

// residual estimates the error of the step, tangents relative to their size.
func (b *twoPoint) residual(h float64) float64 {
	w := b.w
	n := w.l.n
	r := w.slope
	clear(r)
	ahead, behind := 1.0, 1.0
	for p := 0; p <= b.m+1; p++ {
		f := b.weights[1][p]
		x, y := w.poly.c[p*w.poly.block:(p+1)*w.poly.block], b.ahead.c[p*w.poly.block:(p+1)*w.poly.block]
		u, v := f*ahead, f*behind
		for i := range x {
			r[i] += u*x[i] - v*y[i]
		}
		ahead *= h
		behind *= -h
	}
	var worst float64
	for q := 0; q <= w.k; q++ {
		e := r[q*n : (q+1)*n]
		b.solve(e)
		size := 1.0
		if q > 0 {
			size = math.Max(largest(w.next[q*n:(q+1)*n]), largest(w.poly.part(0, q, n)))
			size = math.Max(size, 1e-300)
		}
		if q == 0 {
			copy(b.local, e)
		}
		v := largest(e) / size
		if !(v <= worst) {
			worst = v
		}
	}
	return worst
}
