package lindblad

import "math"

// The exponential of a matrix A by products only: Taylor of degree 16 in the
// scheme of Paterson & Stockmeyer (SIAM J. Comput. 2, 60, 1973), six products,
// of A/2^s, then s squarings. It is kept as Q = exp(A) − 1 and squared as
// Q ← 2Q + Q², which keeps slow rates beside fast ones. After each squaring the
// population rows of every column are made to sum to zero, so that no trace is
// lost. Derivatives come by products of pairs (A, E)(B, F) = (AB, AF + EB).

// radius is where the Taylor polynomial of degree 16 is exact to double
// precision (Al-Mohy & Higham, SIAM J. Sci. Comput. 33, 488, 2011, table 3.1).
const radius = 0.78

var inverseFactorial = func() (c [17]float64) {
	c[0] = 1
	for i := 1; i < len(c); i++ {
		c[i] = c[i-1] / float64(i)
	}
	return
}()

// exponential is the workspace.
type exponential struct {
	vals                []float64 // of the generator and its derivatives, on the pattern
	a, a2, a3, a4, y, z full
	spare               []int32
}

// reset prepares for a generator and k derivatives, see put.
func (w *exponential) reset(l *Layout, k int) {
	for _, m := range []*full{&w.a, &w.a2, &w.a3, &w.a4, &w.y, &w.z} {
		m.reset(l, k)
	}
	w.a.likeLayout(l)
	w.vals = sized(w.vals, (1+k)*len(l.col))
}

// put sets part q to a generator on the pattern, times f.
func (w *exponential) put(l *Layout, q int, vals []float64, f float64) {
	w.a.put(l, q, vals, f)
	out := w.vals[q*len(l.col):][:len(vals)]
	for i, v := range vals {
		out[i] = f * v
	}
}

// leftTimes sets c = a·b for the generator a.
func (w *exponential) leftTimes(l *Layout, c, b *full) {
	if c.n <= smallest {
		c.multiply(&w.a, b)
		return
	}
	c.timesPattern(l, w.vals, b)
}

func scale(x []float64, f float64) {
	for i := range x {
		x[i] *= f
	}
}

// run returns Q with derivatives for the matrix w.a, how many squarings it took
// and the size of the matrix. The result is overwritten by the next run.
func (w *exponential) run(l *Layout) (q *full, squarings int, size float64) {
	w.leftTimes(l, &w.a2, &w.a)
	w.leftTimes(l, &w.a3, &w.a2)
	size = math.Min(w.a.norm(), math.Max(math.Sqrt(w.a2.norm()), math.Cbrt(w.a3.norm())))
	s := 0
	if size > radius {
		s = int(math.Ceil(math.Log2(size / radius)))
	}
	if s > 0 {
		f := math.Ldexp(1, -s)
		w.a.scale(f)
		scale(w.vals, f)
		w.a2.scale(f * f)
		w.a3.scale(f * f * f)
	}
	w.leftTimes(l, &w.a4, &w.a3)
	pops := l.pops
	c := &inverseFactorial
	y, z := &w.y, &w.z
	y.lo, y.hi = append(y.lo[:0], w.a4.lo...), append(y.hi[:0], w.a4.hi...)
	y.sum(c[16], &w.a4, w, c[15], c[14], c[13], c[12])
	for b := 8; b >= 0; b -= 4 {
		z.multiply(y, &w.a4)
		d := c[b]
		if b == 0 {
			d = 0
		}
		z.sum(1, z, w, c[b+3], c[b+2], c[b+1], d)
		y, z = z, y
	}
	w.spare = y.spareRows(w.spare, pops)
	y.conserve(pops, w.spare)
	for i := s; i > 0; i-- {
		z.square(y)
		y, z = z, y
		y.conserve(pops, w.spare)
	}
	return y, s, size
}

// sum sets x = f·y + c3·A³ + c2·A² + c1·A + c0.
func (x *full) sum(f float64, y *full, w *exponential, c3, c2, c1, c0 float64) {
	if x.n <= smallest {
		a, a2, a3, v := w.a.a, w.a2.a[:len(x.a)], w.a3.a[:len(x.a)], y.a[:len(x.a)]
		a = a[:len(x.a)]
		for i := range x.a {
			x.a[i] = f*v[i] + (c3*a3[i] + c2*a2[i] + c1*a[i])
		}
	} else {
		for q := 0; q <= x.k; q++ {
			xs, ys, a, a2, a3 := x.part(q), y.part(q), w.a.part(q), w.a2.part(q), w.a3.part(q)
			for i := 0; i < x.m; i++ {
				row := i * x.m
				b := i / 4
				lo, hi := row+int(x.lo[b]), row+int(x.hi[b])
				if f != 1 || x != y {
					for j := lo; j < hi; j++ {
						xs[j] = f * ys[j]
					}
				}
				plus(xs[row:], a3[row:], c3, w.a3.lo[b], w.a3.hi[b])
				plus(xs[row:], a2[row:], c2, w.a2.lo[b], w.a2.hi[b])
				plus(xs[row:], a[row:], c1, w.a.lo[b], w.a.hi[b])
			}
		}
	}
	for i := 0; i < x.n; i++ {
		x.a[i*x.m+i] += c0
	}
}

func plus(x, y []float64, c float64, lo, hi int32) {
	if lo >= hi {
		return
	}
	x = x[lo:hi]
	y = y[lo:][:len(x)]
	for j, v := range y {
		x[j] += c * v
	}
}

// addTo adds f·y.
func (x *full) addTo(y *full, f float64) {
	if x.n <= smallest {
		ya := y.a[:len(x.a)]
		for i, v := range ya {
			x.a[i] += f * v
		}
		return
	}
	x.widen(y)
	for q := 0; q <= x.k; q++ {
		xs, ys := x.part(q), y.part(q)
		for i := 0; i < x.m; i++ {
			plus(xs[i*x.m:], ys[i*x.m:], f, y.lo[i/4], y.hi[i/4])
		}
	}
}

// widen lets the intervals of x hold those of y.
func (x *full) widen(y *full) {
	for b := range x.lo {
		lo, hi := x.lo[b], x.hi[b]
		if lo >= hi {
			lo, hi = y.lo[b], y.lo[b]
		}
		l, h := min(lo, y.lo[b]), max(hi, y.hi[b])
		if y.lo[b] >= y.hi[b] || l == x.lo[b] && h == x.hi[b] {
			continue
		}
		for q := 0; q <= x.k; q++ {
			a := x.part(q)
			for i := 4 * b; i < 4*b+4; i++ {
				clear(a[i*x.m+int(l) : i*x.m+int(lo)])
				clear(a[i*x.m+int(hi) : i*x.m+int(h)])
			}
		}
		x.lo[b], x.hi[b] = l, h
	}
}

// conserve makes the population rows of each column sum to zero; what rounding
// left is taken from the element at the place in spare, see spareRows.
func (x *full) conserve(pops, spare []int32) {
	if x.n <= smallest {
		n := x.n
		for q := 0; q <= x.k; q++ {
			a := x.part(q)
			for c := 0; c < n; c++ {
				var sum float64
				for _, p := range pops {
					sum += a[int(p)*n+c]
				}
				if spare[c] < 0 && sum != 0 {
					spare[c] = x.spareRow(c, pops)
				}
				if spare[c] >= 0 {
					a[spare[c]] -= sum
				}
			}
		}
		return
	}
	for q := 0; q <= x.k; q++ {
		a := x.part(q)
		sums := zeroed(x.sums, x.m)
		for _, p := range pops {
			lo, hi := x.lo[p/4], x.hi[p/4]
			row := a[int(p)*x.m:]
			for c := lo; c < hi; c++ {
				sums[c] += row[c]
			}
		}
		for c, sum := range sums[:x.n] {
			if sum == 0 {
				continue
			}
			if spare[c] < 0 {
				spare[c] = x.spareRow(c, pops)
			}
			if spare[c] >= 0 {
				a[spare[c]] -= sum
			}
		}
		x.sums = sums
	}
}

// spareRows finds for each column the element that takes what rounding leaves:
// of the population rows the one that is largest; −1 where all are zero.
func (x *full) spareRows(spare, pops []int32) []int32 {
	spare = sized(spare, x.n)
	for c := range spare {
		spare[c] = x.spareRow(c, pops)
	}
	return spare
}

func (x *full) spareRow(c int, pops []int32) int32 {
	at, most := int32(-1), 0.0
	for _, p := range pops {
		if x.n > smallest && (int32(c) < x.lo[p/4] || int32(c) >= x.hi[p/4]) {
			continue
		}
		for q := 0; q <= x.k; q++ { // a column may hold slopes only
			if v := math.Abs(x.part(q)[int(p)*x.m+c]); v > most {
				most, at = v, p*int32(x.m)+int32(c)
			}
		}
	}
	return at
}

// norm is the largest column sum of absolute values of the matrix itself.
func (x *full) norm() float64 {
	var most float64
	if x.n <= smallest {
		n := x.n
		for j := 0; j < n; j++ {
			var s float64
			for i := j; i < n*n; i += n {
				s += math.Abs(x.a[i])
			}
			most = max(most, s)
		}
		return most
	}
	x.sums = zeroed(x.sums, x.m)
	sums := x.sums
	for i := 0; i < x.n; i++ {
		for j := x.lo[i/4]; j < x.hi[i/4]; j++ {
			sums[j] += math.Abs(x.a[i*x.m+int(j)])
		}
	}
	for _, s := range sums {
		most = max(most, s)
	}
	return most
}

func (x *full) scale(f float64) {
	if x.n <= smallest {
		for i := range x.a {
			x.a[i] *= f
		}
		return
	}
	for q := 0; q <= x.k; q++ {
		a := x.part(q)
		for i := 0; i < x.m; i++ {
			for j := int(x.lo[i/4]); j < int(x.hi[i/4]); j++ {
				a[i*x.m+j] *= f
			}
		}
	}
}
