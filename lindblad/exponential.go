package lindblad

import "math"

// The exponential of a matrix A of n×n by products only: Taylor of degree 16
// in the scheme of Paterson & Stockmeyer (SIAM J. Comput. 2, 60, 1973), six
// products, of A/2^s, then s squarings. It is kept as Q = exp(A) − 1 and
// squared as Q ← 2Q + Q², which keeps slow rates beside fast ones. After each
// squaring the population rows of every column are made to sum to zero, so
// that no trace is lost. Derivatives come by products of pairs
//
//	(A, E)(B, F) = (AB, AF + EB).

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

// exponential is the workspace. Each of the matrices has 1 + k parts: the
// value and its derivatives along k directions.
type exponential struct {
	n    int
	pops []int32

	a, a2, a3, a4, y, z []float64
}

func (w *exponential) reset(n, k int, pops []int32) {
	w.n, w.pops = n, pops
	for _, m := range []*[]float64{&w.a, &w.a2, &w.a3, &w.a4, &w.y, &w.z} {
		*m = sized(*m, (1+k)*n*n)
	}
}

// run returns Q and derivatives of the exponential of w.a, in w.a's layout.
// The result is overwritten by the next run.
func (w *exponential) run(k int) []float64 {
	n := w.n
	nn := n * n
	w.multiply(w.a2, w.a, w.a, k)
	w.multiply(w.a3, w.a2, w.a, k)
	size := math.Min(norm1(w.a[:nn], n), math.Max(math.Sqrt(norm1(w.a2[:nn], n)), math.Cbrt(norm1(w.a3[:nn], n))))
	for j := 1; j <= k; j++ {
		// The derivative's norm counts with A's: its series converges alike.
		_ = j
	}
	s := 0
	if size > radius {
		s = int(math.Ceil(math.Log2(size / radius)))
	}
	if s > 0 {
		f := math.Ldexp(1, -s)
		scale(w.a, f)
		scale(w.a2, f*f)
		scale(w.a3, f*f*f)
	}
	w.multiply(w.a4, w.a2, w.a2, k)
	c := &inverseFactorial
	y, z := w.y, w.z
	for i := range y {
		y[i] = c[16]*w.a4[i] + c[15]*w.a3[i] + c[14]*w.a2[i] + c[13]*w.a[i]
	}
	addIdentity(y, n, c[12])
	for b := 8; b >= 0; b -= 4 {
		w.multiply(z, y, w.a4, k)
		for i := range z {
			z[i] += c[b+3]*w.a3[i] + c[b+2]*w.a2[i] + c[b+1]*w.a[i]
		}
		if b > 0 {
			addIdentity(z, n, c[b])
		}
		y, z = z, y
	}
	w.conserve(y, k)
	for ; s > 0; s-- {
		w.multiply(z, y, y, k)
		for i := range z {
			z[i] += 2 * y[i]
		}
		y, z = z, y
		w.conserve(y, k)
	}
	w.y, w.z = y, z
	return y
}

// multiply sets c = a·b for matrices with derivatives.
func (w *exponential) multiply(c, a, b []float64, k int) {
	nn := w.n * w.n
	product(c[:nn], a[:nn], b[:nn], w.n, false)
	for j := 1; j <= k; j++ {
		d := c[j*nn : (j+1)*nn]
		product(d, a[:nn], b[j*nn:(j+1)*nn], w.n, false)
		product(d, a[j*nn:(j+1)*nn], b[:nn], w.n, true)
	}
}

// conserve makes the population rows of each column sum to zero.
func (w *exponential) conserve(q []float64, k int) {
	n := w.n
	for j := 0; j <= k; j++ {
		conserve(q[j*n*n:(j+1)*n*n], n, w.pops)
	}
}

func conserve(q []float64, n int, pops []int32) {
	for c := 0; c < n; c++ {
		var sum, most float64
		at := -1
		for _, p := range pops {
			v := q[int(p)*n+c]
			sum += v
			if m := math.Abs(v); m > most {
				most, at = m, int(p)*n+c
			}
		}
		if at >= 0 {
			q[at] -= sum
		}
	}
}

// product sets c = a·b, or c += a·b.
func product(c, a, b []float64, n int, add bool) {
	if !add {
		clear(c)
	}
	for i := 0; i < n; i++ {
		ci := c[i*n : i*n+n]
		for k := 0; k < n; k++ {
			v := a[i*n+k]
			if v == 0 {
				continue
			}
			bk := b[k*n : k*n+n]
			for j, x := range bk {
				ci[j] += v * x
			}
		}
	}
}

func norm1(a []float64, n int) float64 {
	var most float64
	for j := 0; j < n; j++ {
		var s float64
		for i := 0; i < n; i++ {
			s += math.Abs(a[i*n+j])
		}
		most = math.Max(most, s)
	}
	return most
}

func scale(a []float64, f float64) {
	for i := range a {
		a[i] *= f
	}
}

func addIdentity(a []float64, n int, v float64) {
	for i := 0; i < n; i++ {
		a[i*n+i] += v
	}
}
