package lindblad

import (
	"fmt"
	"math"
)

// cone keeps density matrices positive. The watch is a Cholesky factorisation
// of ρ + 1e-13, block by block. A state that fails by next to nothing is mixed
// with a little of the uniform state; one that fails by more is replaced by the
// nearest density matrix of the same trace (Smolin, Gambetta & Smith, Phys. Rev.
// Lett. 108, 070502, 2012) or, where that would fill coordinates that cannot be
// reached, by the least mixture with the uniform state.
type cone struct {
	layout *Layout
	made   uint64
	blocks [][]int      // levels joined by coherences that can be reached
	places [][]int      // of each block: populations, then real and imaginary parts
	rho    []complex128 // scratch space
	saved  []float64
}

const shift = 1e-13

// reset finds the blocks: levels joined by reachable coherences.
func (w *cone) reset(l *Layout) {
	if w.layout == l && w.made == l.made {
		return
	}
	w.layout, w.made = l, l.made
	n := l.levels
	parent := make([]int, n)
	for i := range parent {
		parent[i] = i
	}
	root := func(i int) int {
		for parent[i] != i {
			i = parent[i]
		}
		return i
	}
	for _, g := range l.global {
		if int(g) >= n {
			a, b := pairOf(n, int(g))
			if ra, rb := root(a), root(b); ra < rb {
				parent[rb] = ra
			} else {
				parent[ra] = rb
			}
		}
	}
	w.blocks = w.blocks[:0]
	at := make([]int, n)
	for i := 0; i < n; i++ {
		if l.index[i] < 0 {
			continue
		}
		if root(i) == i {
			at[i] = len(w.blocks)
			w.blocks = append(w.blocks, nil)
		}
		b := &w.blocks[at[root(i)]]
		*b = append(*b, i)
	}
	w.places = w.places[:0]
	for _, b := range w.blocks {
		var at []int
		for _, i := range b {
			at = append(at, l.index[i])
		}
		for i, u := range b {
			for _, v := range b[i+1:] {
				k := pairAt(n, u, v)
				at = append(at, l.index[k], l.index[k+1])
			}
		}
		w.places = append(w.places, at)
	}
	most := 0
	for _, b := range w.blocks {
		most = max(most, len(b))
	}
	w.rho = make([]complex128, most*most)
}

// keep repairs x when it lies outside the cone; low is the lowest eigenvalue
// that it had.
func (w *cone) keep(l *Layout, x []float64) (low float64, repaired bool) {
	w.reset(l)
	if w.inside(l, x) {
		return 0, false
	}
	// What rounding or a small error left goes by a small mixture.
	uniform := l.trace(x) / float64(len(l.pops))
	w.saved = append(w.saved[:0], x...)
	done := 0.0
	for p := shift / uniform; p*uniform < smallRepair; p *= 2 {
		w.mix(l, x, (p-done)/(1-done), uniform)
		done = p
		if w.inside(l, x) {
			return -p * uniform, true
		}
	}
	copy(x, w.saved)
	return w.repair(l, x), true
}

// smallRepair is the lowest eigenvalue up to which no nearest state is sought.
const smallRepair = 1e-11

func (w *cone) inside(l *Layout, x []float64) bool {
	for b := range w.blocks {
		if !w.positive(l, x, b) {
			return false
		}
	}
	return true
}

func (w *cone) load(l *Layout, x []float64, block []int) {
	m := len(block)
	for i, a := range block {
		for j, b := range block[:i+1] {
			w.rho[i*m+j] = l.Coherence(x, a, b)
		}
	}
}

// positive tells whether the block of ρ + 1e-13 has positive pivots.
func (w *cone) positive(l *Layout, x []float64, number int) bool {
	block := w.blocks[number]
	at := w.places[number]
	switch len(block) {
	case 1:
		return x[at[0]] > -shift
	case 2:
		d0, d1 := x[at[0]]+shift, x[at[1]]+shift
		re, im := value(x, at[2]), value(x, at[3])
		return d0 > 0 && d1-(re*re+im*im)/(2*d0) > 0
	case 3:
		// coordinates are √2 times the elements
		d0, d1, d2 := x[at[0]]+shift, x[at[1]]+shift, x[at[2]]+shift
		a, b := value(x, at[3]), value(x, at[4]) // 01
		c, d := value(x, at[5]), value(x, at[6]) // 02
		e, f := value(x, at[7]), value(x, at[8]) // 12
		if !(d0 > 0) {
			return false
		}
		g := 0.5 / d0
		d1 -= (a*a + b*b) * g
		d2 -= (c*c + d*d) * g
		if !(d1 > 0) {
			return false
		}
		// ρ_12 − ρ_10 ρ_02/d0, with ρ_10 the conjugate of ρ_01
		g *= math.Sqrt2
		e -= (a*c + b*d) * g
		f -= (a*d - b*c) * g
		return d2-(e*e+f*f)/(2*d1) > 0
	}
	w.load(l, x, block)
	m := len(block)
	r := w.rho
	for i := 0; i < m; i++ {
		d := real(r[i*m+i]) + shift
		for j := 0; j < i; j++ {
			v := r[i*m+j]
			for k := 0; k < j; k++ {
				u := r[j*m+k]
				v -= r[i*m+k] * complex(real(u), -imag(u))
			}
			f := 1 / real(r[j*m+j])
			v = complex(real(v)*f, imag(v)*f)
			r[i*m+j] = v
			d -= real(v)*real(v) + imag(v)*imag(v)
		}
		if !(d > 0) {
			return false
		}
		r[i*m+i] = complex(math.Sqrt(d), 0)
	}
	return true
}

// value is coordinate i of x; −1 is one that cannot be reached.
func value(x []float64, i int) float64 {
	if i < 0 {
		return 0
	}
	return x[i]
}

// repair projects x and returns its lowest eigenvalue.
func (w *cone) repair(l *Layout, x []float64) float64 {
	n := l.levels
	rho := make([]complex128, n*n)
	l.State(x, rho)
	vec, val := hermitianEigen(rho, n)
	low := math.Inf(1)
	order := make([]int, 0, n)
	for i, v := range val {
		low = math.Min(low, v)
		order = append(order, i)
	}
	// Nearest: drop the lowest eigenvalues, spreading what they were.
	for i := 1; i < len(order); i++ {
		for j := i; j > 0 && val[order[j]] < val[order[j-1]]; j-- {
			order[j], order[j-1] = order[j-1], order[j]
		}
	}
	debt := 0.0
	kept := append([]float64(nil), val...)
	for i, o := range order {
		left := float64(len(order) - i)
		if val[o]+debt/left < 0 {
			debt += val[o]
			kept[o] = 0
			continue
		}
		for _, q := range order[i:] {
			kept[q] = val[q] + debt/left
		}
		break
	}
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			var v complex128
			for q := 0; q < n; q++ {
				u := vec[j*n+q]
				v += vec[i*n+q] * complex(kept[q], 0) * complex(real(u), -imag(u))
			}
			rho[i*n+j] = v
		}
	}
	for i, g := range l.global {
		x[i] = coordinate(rho, n, int(g))
	}
	if !w.inside(l, x) {
		copy(x, w.saved)
		uniform := l.trace(x) / float64(len(l.pops))
		w.mix(l, x, -low/(uniform-low), uniform)
	}
	return low
}

// mix sets x = (1−p)x + p·(uniform state over the levels that can be reached).
func (w *cone) mix(l *Layout, x []float64, p, uniform float64) {
	for i := 0; i < l.reach; i++ {
		x[i] *= 1 - p
	}
	for _, i := range l.pops {
		x[i] += p * uniform
	}
}

// hermitianEigen diagonalises a (n×n, row-major, overwritten) by Jacobi's
// rotations. Column q of vec is the eigenvector of val[q].
func hermitianEigen(a []complex128, n int) (vec []complex128, val []float64) {
	vec = make([]complex128, n*n)
	for i := 0; i < n; i++ {
		vec[i*n+i] = 1
	}
	conj := func(z complex128) complex128 { return complex(real(z), -imag(z)) }
	for sweep := 0; sweep < 60; sweep++ {
		var off, all float64
		for i := 0; i < n; i++ {
			for j := 0; j < n; j++ {
				v := real(a[i*n+j])*real(a[i*n+j]) + imag(a[i*n+j])*imag(a[i*n+j])
				all += v
				if i != j {
					off += v
				}
			}
		}
		if off <= 1e-36*all {
			break
		}
		for p := 0; p < n; p++ {
			for q := p + 1; q < n; q++ {
				h := a[p*n+q]
				m := math.Hypot(real(h), imag(h))
				if m == 0 {
					continue
				}
				phase := h / complex(m, 0)
				theta := (real(a[q*n+q]) - real(a[p*n+p])) / (2 * m)
				t := 1 / (math.Abs(theta) + math.Sqrt(theta*theta+1))
				if theta < 0 {
					t = -t
				}
				c := 1 / math.Sqrt(t*t+1)
				s := complex(t*c, 0)
				// columns: p' = c p − s e^{−iφ} q,  q' = s e^{iφ} p + c q
				for i := 0; i < n; i++ {
					x, y := a[i*n+p], a[i*n+q]
					a[i*n+p] = complex(c, 0)*x - s*conj(phase)*y
					a[i*n+q] = s*phase*x + complex(c, 0)*y
					x, y = vec[i*n+p], vec[i*n+q]
					vec[i*n+p] = complex(c, 0)*x - s*conj(phase)*y
					vec[i*n+q] = s*phase*x + complex(c, 0)*y
				}
				for i := 0; i < n; i++ {
					x, y := a[p*n+i], a[q*n+i]
					a[p*n+i] = complex(c, 0)*x - s*phase*y
					a[q*n+i] = s*conj(phase)*x + complex(c, 0)*y
				}
			}
		}
	}
	val = make([]float64, n)
	for i := range val {
		val[i] = real(a[i*n+i])
	}
	return vec, val
}

// rounding is how far a propagator of n coordinates after some squarings may
// lead out of the cone.
func rounding(n, squarings int) float64 {
	return float64(n) * math.Ldexp(2e-16, min(squarings, 60))
}

// watchEvery is how far a state may have left the cone before it is checked
// again; with the shift of the check it stays below 1e-12.
const watchEvery = 3e-13

// keep guards the state when it may have left the cone.
func (s *Solver) keep() {
	if s.watch > watchEvery {
		s.guard(s.x[:s.l.n])
	}
}

// guard brings x back into the cone and keeps the statistics.
func (s *Solver) guard(x []float64) {
	s.watch = 0
	s.stats.TraceError = math.Max(s.stats.TraceError, math.Abs(s.l.trace(x)-s.trace))
	trace := s.l.trace(x)
	low, repaired := s.cone.keep(s.l, x)
	if !repaired {
		return
	}
	s.l.setTrace(x, trace)
	s.stats.Projections++
	s.stats.LowestFound = math.Min(s.stats.LowestFound, low)
	if -low > s.accuracy {
		s.warn(fmt.Sprintf("a state had the eigenvalue %.1g and was replaced by the nearest density matrix", low))
	}
}
