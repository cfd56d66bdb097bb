package lindblad

// hermite is the state within a step of the two-point series: the polynomial of
// degree 2m+1 that has the first m derivatives of both ends,
//
//	x(u) = Σ_p h^p [α_p(u) c_p(0) + (−1)^p α_p(1−u) c_p(1)],
//	α_p(u) = u^p (1−u)^{m+1} Σ_{j≤m−p} C(m+j, j) u^j,  u = τ/h.
type hermite struct {
	m          int
	h          float64
	start, end *polynomial
	binomials  [maxOrder]float64 // C(m+j, j)
	weights    [2][maxOrder]float64
}

func (w *hermite) reset(m int) {
	w.m = m
	w.binomials[0] = 1
	for j := 1; j <= m; j++ {
		w.binomials[j] = w.binomials[j-1] * float64(m+j) / float64(j)
	}
}

// side sets weights to h^p α_p(u).
func (w *hermite) side(out *[maxOrder]float64, u, h float64) {
	m := w.m
	power, low, v := 1.0, 1-u, 1-u // u^j, (1−u)^{j+1}
	sum := 0.0
	for j, c := range w.binomials[:m+1] {
		sum += c * power
		out[m-j] = sum
		power *= u
		if j < m {
			low *= v
		}
	}
	for p := range out[:m+1] {
		out[p] *= low
		low *= u * h
	}
}

// slopes sets weights to the derivative of h^p α_p(u) by u.
func (w *hermite) slopes(out *[maxOrder]float64, u, h float64) {
	m := w.m
	var sums, slopes [maxOrder]float64
	var sum, slope float64
	power, below := 1.0, 0.0 // u^j and j u^{j−1}
	for j := 0; j <= m; j++ {
		sum += w.binomials[j] * power
		slope += w.binomials[j] * below
		sums[j], slopes[j] = sum, slope
		below = below*u + power
		power *= u
	}
	v := 1 - u
	low := 1.0 // (1−u)^m
	for j := 0; j < m; j++ {
		low *= v
	}
	power = 1
	before := 0.0 // the derivative of power
	for p := 0; p <= m; p++ {
		out[p] = low * (before*v*sums[m-p] - power*float64(m+1)*sums[m-p] + power*v*slopes[m-p])
		before = float64(p+1) * power * h
		power *= u * h
	}
}

// mix sets y to the sum of both ends' series with the weights, those of the end
// times sign.
func (w *hermite) mix(y []float64, sign float64) {
	block := w.start.block
	y = y[:block]
	a, b := w.start.c, w.end.c
	clear(y)
	for p := 0; p <= w.m; p++ {
		f, g := w.weights[0][p], sign*w.weights[1][p]
		x, z := a[p*block:][:len(y)], b[p*block:][:len(y)]
		for i, v := range x {
			y[i] += f*v + g*z[i]
		}
	}
}

// at evaluates the state at τ.
func (w *hermite) at(y []float64, tau float64) {
	u := tau / w.h
	w.side(&w.weights[0], u, w.h)
	w.side(&w.weights[1], 1-u, -w.h)
	w.mix(y, 1)
}

// slopeAt evaluates its derivative by time.
func (w *hermite) slopeAt(y []float64, tau float64) {
	u := tau / w.h
	w.slopes(&w.weights[0], u, w.h)
	w.slopes(&w.weights[1], 1-u, -w.h)
	w.mix(y, -1)
	for i := range y[:w.start.block] {
		y[i] /= w.h
	}
}
