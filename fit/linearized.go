package fit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
	"gonum.org/v1/gonum/mat"
)

// linearized is the problem min ‖r + Jp‖ at one point, within bounds on p. It
// keeps, in place of J and r, the triangle that a QR factorization of [J r]
// leaves: same lengths, at most n+1 rows.
type linearized struct {
	n         int
	rows      int
	j         []float64 // rows×n
	r         []float64 // rows
	lengths   []float64 // of the columns of J
	scale     []float64 // D
	low, high []float64 // bounds of the step
	pinned    []bool    // stands at a bound and would leave it outwards

	buffer, tau, work []float64

	// factors of J D⁻¹ for the free parameters of the last call
	factored []bool
	free     []int
	u, v     mat.Dense
	values   []float64
}

// A proposal is a step with the fall of ‖r‖² that it promises. inside: it is
// the minimum within the bounds, not held back by the radius.
type proposal struct {
	p         []float64
	predicted float64
	inside    bool
}

func (l *linearized) at(jacobian, r, x, scale []float64, set Settings) {
	l.n = len(x)
	l.scale = scale
	l.compress(jacobian, r)
	l.factored = nil
	for j := range x {
		l.low[j], l.high[j] = set.Lower[j]-x[j], set.Upper[j]-x[j]
		slope, length := 0.0, 0.0
		for i := range l.rows {
			slope += l.j[i*l.n+j] * l.r[i]
			length = math.Hypot(length, l.j[i*l.n+j])
		}
		l.lengths[j] = length
		l.pinned[j] = l.low[j] == l.high[j] || l.low[j] == 0 && slope > 0 || l.high[j] == 0 && slope < 0
	}
}

func (l *linearized) compress(jacobian, r []float64) {
	m, n := len(r), l.n
	w := n + 1
	if cap(l.buffer) < m*w {
		l.buffer = make([]float64, m*w)
	}
	a := blas64.General{Rows: m, Cols: w, Stride: w, Data: l.buffer[:m*w]}
	for i := range m {
		copy(a.Data[i*w:i*w+n], jacobian[i*n:i*n+n])
		a.Data[i*w+n] = r[i]
	}
	l.rows = m
	if m > w {
		if l.tau == nil {
			l.tau = make([]float64, w)
			size := []float64{0}
			lapack64.Geqrf(a, l.tau, size, -1)
			l.work = make([]float64, int(size[0]))
		}
		lapack64.Geqrf(a, l.tau, l.work, len(l.work))
		for i := 1; i < w; i++ {
			clear(a.Data[i*w : i*w+i])
		}
		l.rows = w
	}
	if l.j == nil {
		l.j, l.r = make([]float64, l.rows*n), make([]float64, l.rows)
	}
	for i := range l.rows {
		copy(l.j[i*n:i*n+n], a.Data[i*w:i*w+n])
		l.r[i] = a.Data[i*w+n]
	}
}

// step solves within ‖Dp‖ ≤ radius and the bounds.
func (l *linearized) step(radius float64) proposal {
	lambda := 0.0
	p := make([]float64, l.n)
	l.factor(l.pinned)
	g := l.project(l.r)
	if !math.IsInf(radius, 1) {
		lambda = l.damping(g, radius)
	}
	l.solve(g, lambda, p)
	for j, v := range p {
		if v < l.low[j] || v > l.high[j] {
			p, lambda = l.bounded(radius, lambda)
			break
		}
	}
	return proposal{p: p, predicted: max(l.promise(p), 0), inside: lambda == 0}
}

// bounded finds the damping for which the step within the bounds is as long as
// the radius, from a guess; 0 if that step is shorter anyway.
func (l *linearized) bounded(radius, guess float64) ([]float64, float64) {
	p := l.box(0)
	if weightedLength(l.scale, p) <= 1.1*radius {
		return p, 0
	}
	// The length falls with the damping.
	low, high := 0.0, math.Inf(1)
	lambda := guess
	if lambda == 0 {
		lambda = 1 // columns of J D⁻¹ are at most one long
	}
	for range 60 {
		p = l.box(lambda)
		length := weightedLength(l.scale, p)
		switch {
		case length > 1.1*radius:
			low = lambda
		case length < 0.8*radius:
			high = lambda
		default:
			return p, lambda
		}
		switch {
		case math.IsInf(high, 1):
			lambda *= 8
		case low == 0:
			lambda /= 8
		default:
			lambda = math.Sqrt(low * high)
		}
	}
	return p, lambda
}

// box minimizes ‖r + Jp‖² + λ‖Dp‖² within the bounds: from p = 0 towards the
// minimum of the free parameters, as far as the first bound, where that one
// stays; when the minimum is reached, the one that wants to leave its bound
// most is freed again (P. B. Stark, R. L. Parker, Comput. Stat. 10, 129 (1995)).
func (l *linearized) box(lambda float64) []float64 {
	fixed := slices.Clone(l.pinned)
	p, q := make([]float64, l.n), make([]float64, l.n)
	rest := make([]float64, l.rows)
	for range 10 * (l.n + 1) { // each round lowers the sum; this many never occur
		for {
			copy(rest, l.r)
			for j, f := range fixed {
				q[j] = p[j]
				for i := range rest {
					if f {
						rest[i] += l.j[i*l.n+j] * p[j]
					}
				}
			}
			l.factor(fixed)
			l.solve(l.project(rest), lambda, q)
			share, first := 1.0, -1
			for j := range q {
				bound := l.high[j]
				if q[j] < p[j] {
					bound = l.low[j]
				}
				if fixed[j] || q[j] >= l.low[j] && q[j] <= l.high[j] {
					continue
				}
				if t := (bound - p[j]) / (q[j] - p[j]); t < share {
					share, first = max(t, 0), j
				}
			}
			for j := range p {
				p[j] += share * (q[j] - p[j])
			}
			if first < 0 {
				break
			}
			fixed[first] = true
			p[first] = l.low[first]
			if q[first] > l.high[first] {
				p[first] = l.high[first]
			}
		}
		copy(rest, l.r)
		for i := range rest {
			for j, v := range p {
				rest[i] += l.j[i*l.n+j] * v
			}
		}
		leave, most := -1, 1e-14*math.Sqrt(sumOfSquares(rest))
		for j, f := range fixed {
			if !f || l.low[j] == l.high[j] {
				continue
			}
			slope := lambda * l.scale[j] * p[j]
			for i := range rest {
				slope += l.j[i*l.n+j] / l.scale[j] * rest[i]
			}
			if p[j] == l.high[j] {
				slope = -slope
			}
			if -slope > most {
				leave, most = j, -slope
			}
		}
		if leave < 0 {
			break
		}
		fixed[leave] = false
	}
	return p
}

// promise is ‖r‖² − ‖r + Jp‖², as −(Jp)·(2r + Jp) so that small ones survive.
func (l *linearized) promise(p []float64) float64 {
	sum := 0.0
	for i := range l.rows {
		jp := 0.0
		for j, v := range p {
			jp += l.j[i*l.n+j] * v
		}
		sum -= jp * (2*l.r[i] + jp)
	}
	return sum
}

// project gives the parts of rest along the left singular vectors.
func (l *linearized) project(rest []float64) []float64 {
	g := make([]float64, len(l.values))
	for c := range g {
		for i := range l.rows {
			g[c] += l.u.At(i, c) * rest[i]
		}
	}
	return g
}

// solve sets the free components of p to the minimum of
// ‖rest + Jp‖² + λ‖Dp‖², g the projection of rest.
func (l *linearized) solve(g []float64, lambda float64, p []float64) {
	for a, j := range l.free {
		q := 0.0
		for c, s := range l.values {
			q -= l.v.At(a, c) * g[c] * s / (s*s + lambda)
		}
		p[j] = q / l.scale[j]
	}
}

func (l *linearized) factor(fixed []bool) {
	if l.factored != nil && slices.Equal(l.factored, fixed) {
		return
	}
	l.factored = slices.Clone(fixed)
	l.free = l.free[:0]
	for j, f := range fixed {
		if !f {
			l.free = append(l.free, j)
		}
	}
	k := len(l.free)
	if k == 0 {
		l.values = nil
		return
	}
	a := mat.NewDense(l.rows, k, nil)
	for c, j := range l.free {
		for i := range l.rows {
			a.Set(i, c, l.j[i*l.n+j]/l.scale[j])
		}
	}
	l.u.Reset()
	l.v.Reset()
	l.values = decompose(a, &l.u, &l.v)
	// What is below rounding is noise: moving along it promises nothing.
	for c, s := range l.values {
		if s <= 1e-15*l.values[0] || s == 0 {
			l.values = l.values[:c]
			break
		}
	}
}

// decompose returns the singular values of a, largest first, and a = U S Vᵀ.
func decompose(a *mat.Dense, u, v *mat.Dense) []float64 {
	var svd mat.SVD
	if !svd.Factorize(a, mat.SVDThin) {
		panic("fit: singular values do not converge for finite entries")
	}
	svd.UTo(u)
	svd.VTo(v)
	return svd.Values(nil)
}

// damping finds λ ≥ 0 with ‖q(λ)‖ = radius within a tenth, or 0 if the
// undamped step is short enough, by the safeguarded iteration of M. D. Hebden
// (1973) and Moré (1978) on ‖q(λ)‖² = Σ (g s/(s²+λ))².
func (l *linearized) damping(g []float64, radius float64) float64 {
	length := func(lambda float64) (norm, slope float64) {
		for c, s := range l.values {
			q := g[c] * s / (s*s + lambda)
			norm = math.Hypot(norm, q)
		}
		if norm == 0 {
			return 0, 0
		}
		for c, s := range l.values {
			q := g[c] * s / (s*s + lambda) / norm
			slope -= q * q / (s*s + lambda)
		}
		return norm, slope * norm // d‖q‖/dλ
	}
	norm, slope := length(0)
	if norm <= 1.1*radius {
		return 0
	}
	if radius == 0 {
		return math.Inf(1)
	}
	// ‖q‖ falls and is convex in λ: Newton's root of 1/radius − 1/‖q‖ is
	// between these.
	low, high := -(norm-radius)/slope, 0.0
	for c, s := range l.values {
		high = math.Hypot(high, g[c]*s)
	}
	high /= radius
	lambda := low
	for range 50 {
		if !(lambda >= low && lambda <= high) {
			lambda = max(math.Sqrt(low*high), 1e-3*high)
		}
		norm, slope = length(lambda)
		if math.Abs(norm-radius) <= 0.1*radius {
			break
		}
		if norm > radius {
			low = max(low, lambda)
		} else {
			high = min(high, lambda)
		}
		lambda -= norm / radius * (norm - radius) / slope
	}
	return lambda
}
