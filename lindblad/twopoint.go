package lindblad

import "math"

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
// factors. Within the step the state is the polynomial that has all the
// derivatives of both ends.
type twoPoint struct {
	possible bool
	w        *taylor
	m        int
	weights  [2][]float64 // for m and m+1
	upper    []float64    // inverse of the binomials C(m+1+r, p)
	step     float64      // proposal for the next one
	ahead    polynomial   // series at the end of the step
	source   polynomial
	inside   polynomial // state within the step
	mats     []float64  // N_1 … N_m, n×n each
	lu       []float64
	pivot    []int
	drives   []drive
	first    []float64
}

// drive is one entry of a driven piece.
type drive struct {
	row, col int32
	piece    int32
	val      float64
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
	if m := min(max(int(1+0.25*math.Log(1/accuracy)), 3), 7); m != b.m {
		b.m = m
		b.weights = [2][]float64{padeWeights(m), padeWeights(m + 1)}
		b.upper = hermiteUpper(m)
	}
	b.step = 0
	n, block := w.l.n, (1+w.k)*w.l.n
	b.ahead.reset(block, maxOrder)
	b.source.reset(block, b.m+1)
	b.inside.reset(block, 2*b.m+1)
	b.mats, b.lu, b.pivot = sized(b.mats, b.m*n*n), sized(b.lu, n*n), sized(b.pivot, n)
	b.first = sized(b.first, len(w.vals))
	b.drives = b.drives[:0]
	for i := range w.driven {
		d := &w.driven[i]
		for r, row := range d.rows {
			for e := d.start[r]; e < d.start[r+1]; e++ {
				b.drives = append(b.drives, drive{row, d.col[e], int32(i), d.val[e]})
			}
		}
	}
}

// cost counts the multiplications of one step.
func (b *twoPoint) cost() float64 {
	if !b.possible {
		return 1
	}
	n, m := float64(b.w.l.n), float64(b.m)
	matrices := n * (m*(float64(len(b.w.vals))+2*n) + float64(len(b.drives))*m*(m-1)/2)
	return matrices + n*n*n/2 + 2*b.w.cost(b.m+1)
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
		w.coefficients(f, t+h, m+1)
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
			}
			w.expand(&b.ahead, m+1)
			worst = b.residual(h)
		}
		allowed := perTime * h
		grow := 3.0
		if worst > 0 {
			grow = math.Min(3, 0.9*math.Pow(allowed/worst, 1/float64(2*m)))
		}
		if worst <= allowed {
			if h < b.step { // cut by the end
				b.step = math.Max(b.step, h*grow)
			} else {
				b.step = h * grow
			}
			b.fill(h)
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

// matrices computes N_1 … N_m for the series that coefficients has left:
// (p+1) N_{p+1} = Σ_i L_i N_{p−i}, N_0 = 1.
func (b *twoPoint) matrices() {
	w := b.w
	l := w.l
	n := l.n
	copy(b.first, w.vals)
	for i := range w.driven {
		d := &w.driven[i]
		p := &l.pieces[d.piece]
		f := d.f[0]
		for e, at := range p.at {
			b.first[at] += f * p.val[e]
		}
	}
	for p := 0; p < b.m; p++ {
		out := b.mats[p*n*n : (p+1)*n*n]
		clear(out)
		g := 1 / float64(p+1)
		if p == 0 {
			for i := 0; i < n; i++ {
				for e := l.start[i]; e < l.start[i+1]; e++ {
					out[i*n+int(l.col[e])] = b.first[e]
				}
			}
			continue
		}
		before := b.mats[(p-1)*n*n : p*n*n]
		for i := 0; i < n; i++ {
			row := out[i*n : i*n+n]
			for e := l.start[i]; e < l.start[i+1]; e++ {
				addRow(row, before[int(l.col[e])*n:], g*b.first[e])
			}
		}
		for _, d := range b.drives {
			f := w.driven[d.piece].f
			row := out[int(d.row)*n : int(d.row)*n+n]
			v := d.val * g
			for i := 1; i < p; i++ {
				addRow(row, b.mats[(p-1-i)*n*n+int(d.col)*n:], v*f[i])
			}
			row[d.col] += v * f[p]
		}
	}
}

// addRow adds f·y to x.
func addRow(x, y []float64, f float64) {
	if len(x) == 9 {
		a, b := (*[9]float64)(x), (*[9]float64)(y)
		a[0] += f * b[0]
		a[1] += f * b[1]
		a[2] += f * b[2]
		a[3] += f * b[3]
		a[4] += f * b[4]
		a[5] += f * b[5]
		a[6] += f * b[6]
		a[7] += f * b[7]
		a[8] += f * b[8]
		return
	}
	y = y[:len(x)]
	for i, v := range y {
		x[i] += f * v
	}
}

// system sets lu = Σ w_p (−h)^p N_p.
func (b *twoPoint) system(h float64) {
	n := b.w.l.n
	sign := -h
	for p := 1; p <= b.m; p++ {
		f := b.weights[0][p] * sign
		a := b.mats[(p-1)*n*n : p*n*n]
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
		v := largest(e) / size
		if !(v <= worst) {
			worst = v
		}
	}
	return worst
}

// fill makes the polynomial that has all m derivatives of both ends.
func (b *twoPoint) fill(h float64) {
	m, block := b.m, b.inside.block
	in := &b.inside
	in.order, in.scale = 2*m+1, h
	power := 1.0
	for p := 0; p <= m; p++ {
		x, y := b.w.poly.c[p*block:(p+1)*block], in.c[p*block:(p+1)*block]
		for i, v := range x {
			y[i] = power * v
		}
		power *= h
	}
	// what the derivatives at the end are beyond those of the lower half
	rest := b.source.c
	power = 1
	for p := 0; p <= m; p++ {
		r := rest[p*block : (p+1)*block]
		for i, v := range b.ahead.c[p*block : (p+1)*block] {
			r[i] = power * v
		}
		power *= h
		for q := p; q <= m; q++ {
			f := binomial(q, p)
			for i, v := range in.c[q*block : (q+1)*block] {
				r[i] -= f * v
			}
		}
	}
	for r := 0; r <= m; r++ {
		y := in.c[(m+1+r)*block : (m+2+r)*block]
		clear(y)
		for p := 0; p <= m; p++ {
			f := b.upper[r*(m+1)+p]
			for i, v := range rest[p*block : (p+1)*block] {
				y[i] += f * v
			}
		}
	}
}

func binomial(n, k int) float64 {
	v := 1.0
	for i := 0; i < k; i++ {
		v = v * float64(n-i) / float64(i+1)
	}
	return math.Round(v)
}

// hermiteUpper is the inverse of the matrix C(m+1+r, p), p, r = 0 … m; its
// elements are whole numbers.
func hermiteUpper(m int) []float64 {
	n := m + 1
	a, pivot := make([]float64, n*n), make([]int, n)
	for p := 0; p < n; p++ {
		for r := 0; r < n; r++ {
			a[p*n+r] = binomial(m+1+r, p)
		}
	}
	factor(a, pivot, n)
	out := make([]float64, n*n)
	e := make([]float64, n)
	for p := 0; p < n; p++ {
		clear(e)
		e[p] = 1
		solve(a, pivot, n, e)
		for r := 0; r < n; r++ {
			out[r*n+p] = math.Round(e[r])
		}
	}
	return out
}
