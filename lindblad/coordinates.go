package lindblad

import "math"

// A density matrix of N levels is N² real coordinates: the populations
// 0 … N−1, then for every pair a < b (row by row) √2·Re ρ_ab and √2·Im ρ_ab.
// The map is an isometry: Σ x² = Tr ρ².

// pairAt returns the coordinate of √2·Re ρ_ab, a < b; √2·Im ρ_ab follows it.
func pairAt(levels, a, b int) int {
	return levels + 2*(a*(2*levels-a-1)/2+b-a-1)
}

// Len returns the length of a state: reachable coordinates, then counters.
func (l *Layout) Len() int { return l.n }

// Levels returns the number of levels N.
func (l *Layout) Levels() int { return l.levels }

// Reachable returns how many coordinates of ρ can become non-zero.
func (l *Layout) Reachable() int { return l.reach }

// Counters returns the number of counters.
func (l *Layout) Counters() int { return l.n - l.reach }

// Population returns ρ_aa, zero when level a cannot be reached.
func (l *Layout) Population(x []float64, a int) float64 {
	if i := l.index[a]; i >= 0 {
		return x[i]
	}
	return 0
}

// Coherence returns ρ_ab; for a = b the population.
func (l *Layout) Coherence(x []float64, a, b int) complex128 {
	if a == b {
		return complex(l.Population(x, a), 0)
	}
	sign := 1.0
	if a > b {
		a, b, sign = b, a, -1
	}
	k := pairAt(l.levels, a, b)
	var re, im float64
	if i := l.index[k]; i >= 0 {
		re = x[i] / math.Sqrt2
	}
	if i := l.index[k+1]; i >= 0 {
		im = x[i] / math.Sqrt2
	}
	return complex(re, sign*im)
}

// Counter returns what counter i has collected.
func (l *Layout) Counter(x []float64, i int) float64 { return x[l.reach+i] }

// SetState writes the state of the density matrix rho (N×N, row-major,
// Hermitian: the lower triangle is not read) into x and zeroes the counters.
// Elements outside the support the layout was made for are left out.
func (l *Layout) SetState(x []float64, rho []complex128) {
	for i, g := range l.global {
		x[i] = coordinate(rho, l.levels, int(g))
	}
	for i := l.reach; i < l.n; i++ {
		x[i] = 0
	}
}

// State writes the density matrix of x into rho (N×N, row-major).
func (l *Layout) State(x []float64, rho []complex128) {
	n := l.levels
	for a := 0; a < n; a++ {
		rho[a*n+a] = complex(l.Population(x, a), 0)
		for b := a + 1; b < n; b++ {
			c := l.Coherence(x, a, b)
			rho[a*n+b] = c
			rho[b*n+a] = complex(real(c), -imag(c))
		}
	}
}

// coordinate returns coordinate g of rho.
func coordinate(rho []complex128, levels, g int) float64 {
	if g < levels {
		return real(rho[g*levels+g])
	}
	a, b := pairOf(levels, g)
	if (g-levels)%2 == 0 {
		return math.Sqrt2 * real(rho[a*levels+b])
	}
	return math.Sqrt2 * imag(rho[a*levels+b])
}

// pairOf is the inverse of pairAt for both coordinates of a pair.
func pairOf(levels, g int) (a, b int) {
	k := (g - levels) / 2
	for k >= levels-a-1 {
		k -= levels - a - 1
		a++
	}
	return a, a + 1 + k
}
