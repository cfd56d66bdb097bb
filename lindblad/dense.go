//go:generate go run generate.go

package lindblad

// full is a matrix of n×n with its derivatives along k directions, one after
// the other, each m×m row-major with m = n rounded up to fours (the padding is
// zero). Four rows at a time share the interval of columns [lo, hi) outside of
// which they are zero; lo and hi are multiples of four. That one
// representation serves block-triangular and banded matrices.
type full struct {
	n, m, k int
	a       []float64
	lo, hi  []int32
	limit   *intervals // what any propagator of the layout can fill
	sums    []float64  // scratch space
}

// intervals are columns of blocks of four rows.
type intervals struct{ lo, hi []int32 }

// elements counts what the intervals hold.
func (v *intervals) elements() (sum float64) {
	for i, lo := range v.lo {
		sum += 4 * float64(v.hi[i]-lo)
	}
	return sum
}

// multiplications counts those of a product of two such matrices.
func (v *intervals) multiplications() (sum float64) {
	for i, lo := range v.lo {
		for k := lo / 4; k < v.hi[i]/4; k++ {
			if w := min(v.hi[i], v.hi[k]) - max(lo, v.lo[k]); w > 0 {
				sum += 16 * float64(w)
			}
		}
	}
	return sum
}

// smallest is the size up to which written-out products without intervals and
// padding are used.
const smallest = 9

func (x *full) reset(l *Layout, k int) {
	n := l.n
	m := padded(n)
	x.n, x.m, x.k = n, m, k
	x.limit = &l.closure
	x.a = sized(x.a, (1+k)*m*m)
	x.lo, x.hi = sized(x.lo, (m+3)/4), sized(x.hi, (m+3)/4)
}

func padded(n int) int {
	if n <= smallest {
		return n
	}
	return (n + 3) &^ 3
}

// part returns the value (0) or a derivative.
func (x *full) part(q int) []float64 {
	mm := x.m * x.m
	return x.a[q*mm : (q+1)*mm]
}

// likeLayout sets the intervals to those of the pattern and clears the matrix.
func (x *full) likeLayout(l *Layout) {
	clear(x.a)
	if l.n <= smallest {
		return
	}
	for b := range x.lo {
		lo, hi := int32(l.n), int32(0)
		for i := 4 * b; i < min(4*b+4, l.n); i++ {
			if from, to := l.start[i], l.start[i+1]; from < to {
				lo, hi = min(lo, l.col[from]), max(hi, l.col[to-1]+1)
			}
			lo, hi = min(lo, int32(i)), max(hi, int32(i)+1) // room for the identity
		}
		x.lo[b], x.hi[b] = lo&^3, (hi+3)&^3
	}
}

// put spreads a generator on the pattern, times f, over part q.
func (x *full) put(l *Layout, q int, vals []float64, f float64) {
	a := x.part(q)
	for i := 0; i < l.n; i++ {
		row := a[i*x.m : i*x.m+x.m]
		for e := l.start[i]; e < l.start[i+1]; e++ {
			row[l.col[e]] = vals[e] * f
		}
	}
}

// copyFrom makes x equal to y.
func (x *full) copyFrom(y *full) {
	x.n, x.m, x.k, x.limit = y.n, y.m, y.k, y.limit
	x.a = sized(x.a, len(y.a))
	x.lo, x.hi = sized(x.lo, len(y.lo)), sized(x.hi, len(y.hi))
	copy(x.a, y.a)
	copy(x.lo, y.lo)
	copy(x.hi, y.hi)
}

// multiply sets c = a·b with derivatives: (A, E)(B, F) = (AB, AF + EB).
func (c *full) multiply(a, b *full) {
	if c.n > smallest {
		c.span(a, b)
	}
	c.product(a, b, 0, 0, 0, false)
	for j := 1; j <= c.k; j++ {
		c.product(a, b, j, 0, j, false)
		c.product(a, b, j, j, 0, true)
	}
}

// product sets part r of c to, or adds, part p of a times part q of b.
func (c *full) product(a, b *full, r, p, q int, add bool) {
	x, y, z := a.part(p), b.part(q), c.part(r)
	switch {
	case c.n == 4 && add:
		productAdd4((*[16]float64)(z), (*[16]float64)(x), (*[16]float64)(y))
	case c.n == 4:
		product4((*[16]float64)(z), (*[16]float64)(x), (*[16]float64)(y))
	case c.n == 9 && add:
		productAdd9((*[81]float64)(z), (*[81]float64)(x), (*[81]float64)(y))
	case c.n == 9:
		product9((*[81]float64)(z), (*[81]float64)(x), (*[81]float64)(y))
	case c.n < smallest:
		if !add {
			clear(z)
		}
		productSmall(z, x, y, c.n)
	default:
		if !add {
			for i := range c.lo {
				lo, hi := int(c.lo[i]), int(c.hi[i])
				for r := 4 * i; r < 4*i+4; r++ {
					clear(z[r*c.m+lo : r*c.m+hi])
				}
			}
		}
		c.productBlocks(a, b, x, y, z)
	}
}

// square sets c = 2a + a·a with derivatives.
func (c *full) square(a *full) {
	switch {
	case c.n == 4 && c.k == 0:
		square4((*[16]float64)(c.a), (*[16]float64)(a.a), (*[16]float64)(a.a))
	case c.n == 9 && c.k == 0:
		square9((*[81]float64)(c.a), (*[81]float64)(a.a), (*[81]float64)(a.a))
	case c.n <= smallest:
		c.multiply(a, a)
		c.addTo(a, 2)
	default:
		c.squareBlocks(a)
	}
}

// squareBlocks starts from 2a and adds the products.
func (c *full) squareBlocks(a *full) {
	c.span(a, a)
	for i := range c.lo { // where a has a diagonal it lies inside a·a; union for the rest
		if a.lo[i] < a.hi[i] {
			if c.lo[i] >= c.hi[i] {
				c.lo[i], c.hi[i] = a.lo[i], a.hi[i]
			}
			c.lo[i], c.hi[i] = min(c.lo[i], a.lo[i]), max(c.hi[i], a.hi[i])
		}
		lo, hi := int(c.lo[i]), int(c.hi[i])
		from, to := int(a.lo[i]), int(a.hi[i])
		for q := 0; q <= c.k; q++ {
			z, x := c.part(q), a.part(q)
			for r := 4 * i * c.m; r < (4*i+4)*c.m; r += c.m {
				if from >= to {
					clear(z[r+lo : r+hi])
					continue
				}
				clear(z[r+lo : r+from])
				clear(z[r+to : r+hi])
				row := z[r+from : r+to]
				for j, v := range x[r+from:][:len(row)] {
					row[j] = 2 * v
				}
			}
		}
	}
	c.product(a, a, 0, 0, 0, true)
	for j := 1; j <= c.k; j++ {
		c.product(a, a, j, 0, j, true)
		c.product(a, a, j, j, 0, true)
	}
}

// span sets the intervals to those of a product.
func (c *full) span(a, b *full) {
	for i := range a.lo {
		lo, hi := int32(c.m), int32(0)
		for k := a.lo[i] / 4; k < a.hi[i]/4; k++ {
			lo, hi = min(lo, b.lo[k]), max(hi, b.hi[k])
		}
		lo, hi = max(lo, c.limit.lo[i]), min(hi, c.limit.hi[i])
		if hi <= lo {
			lo, hi = 0, 0
		}
		c.lo[i], c.hi[i] = lo, hi
	}
}

func productSmall(c, a, b []float64, n int) {
	for i := 0; i < n; i++ {
		ci := c[i*n : i*n+n]
		for k := 0; k < n; k++ {
			v := a[i*n+k]
			bk := b[k*n:][:len(ci)]
			for j := range ci {
				ci[j] += v * bk[j]
			}
		}
	}
}

// productBlocks adds a·b, two rows of a with four of b at a time.
func (c *full) productBlocks(a, b *full, x, y, z []float64) {
	m := c.m
	for i := 0; i < m; i += 2 {
		from, to := int(a.lo[i/4]), int(a.hi[i/4])
		least, most := int(c.lo[i/4]), int(c.hi[i/4])
		x0, x1 := x[i*m:i*m+m], x[(i+1)*m:(i+1)*m+m]
		for k := from; k < to; k += 4 {
			lo, hi := max(int(b.lo[k/4]), least), min(int(b.hi[k/4]), most)
			if lo >= hi {
				continue
			}
			p0, p1, p2, p3 := x0[k], x0[k+1], x0[k+2], x0[k+3]
			q0, q1, q2, q3 := x1[k], x1[k+1], x1[k+2], x1[k+3]
			z0 := z[i*m+lo : i*m+hi]
			z1 := z[(i+1)*m+lo:][:len(z0)]
			y0 := y[k*m+lo:][:len(z0)]
			y1 := y[(k+1)*m+lo:][:len(z0)]
			y2 := y[(k+2)*m+lo:][:len(z0)]
			y3 := y[(k+3)*m+lo:][:len(z0)]
			for j := range z0 {
				b0, b1, b2, b3 := y0[j], y1[j], y2[j], y3[j]
				z0[j] += (p0*b0 + p1*b1) + (p2*b2 + p3*b3)
				z1[j] += (q0*b0 + q1*b1) + (q2*b2 + q3*b3)
			}
		}
	}
}

// times sets y = part(q)·x, or adds.
func (x *full) times(y []float64, q int, v []float64, add bool) {
	n, m := x.n, x.m
	a := x.part(q)
	if !add {
		clear(y[:n])
	}
	switch {
	case n == 4:
		times4((*[4]float64)(y), (*[16]float64)(a), (*[4]float64)(v))
		return
	case n == 9:
		times9((*[9]float64)(y), (*[81]float64)(a), (*[9]float64)(v))
		return
	case n <= smallest:
		for i := 0; i < n; i++ {
			row := a[i*n : i*n+n]
			u := v[:len(row)]
			var s float64
			for j, w := range row {
				s += w * u[j]
			}
			y[i] += s
		}
		return
	}
	for i := 0; i < n; i += 4 {
		lo, hi := int(x.lo[i/4]), min(int(x.hi[i/4]), n)
		if lo >= hi {
			continue
		}
		u := v[lo:hi]
		r0 := a[i*m+lo:][:len(u)]
		r1 := a[(i+1)*m+lo:][:len(u)]
		r2 := a[(i+2)*m+lo:][:len(u)]
		r3 := a[(i+3)*m+lo:][:len(u)]
		var s0, s1, s2, s3 float64
		for j, w := range u {
			s0 += r0[j] * w
			s1 += r1[j] * w
			s2 += r2[j] * w
			s3 += r3[j] * w
		}
		if i+4 <= n {
			y[i] += s0
			y[i+1] += s1
			y[i+2] += s2
			y[i+3] += s3
			continue
		}
		for j, s := range [3]float64{s0, s1, s2} {
			if i+j < n {
				y[i+j] += s
			}
		}
	}
}
