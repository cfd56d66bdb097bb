package lindblad

import "math"

// factor replaces the n×n matrix a by its triangular factors, with partial
// pivoting; false when it is singular. The inverses of the pivots stand on the
// diagonal.
func factor(a []float64, pivot []int, n int) bool {
	for c := 0; c < n; c++ {
		p, most := c, math.Abs(a[c*n+c])
		for r := c + 1; r < n; r++ {
			if v := math.Abs(a[r*n+c]); v > most {
				p, most = r, v
			}
		}
		if !(most > 0) || math.IsInf(most, 1) {
			return false
		}
		pivot[c] = p
		top := a[c*n : c*n+n]
		if p != c {
			other := a[p*n : p*n+n]
			for j, v := range top {
				top[j], other[j] = other[j], v
			}
		}
		inverse := 1 / top[c]
		top[c] = inverse
		tail := top[c+1:]
		for r := c + 1; r < n; r++ {
			row := a[r*n : r*n+n]
			f := row[c] * inverse
			row[c] = f
			if f == 0 {
				continue
			}
			row = row[c+1:][:len(tail)]
			for j, v := range tail {
				row[j] -= f * v
			}
		}
	}
	return true
}

// solve replaces x by the solution of the factored system.
func solve(a []float64, pivot []int, n int, x []float64) {
	x = x[:n]
	for c, p := range pivot[:n] {
		if p != c {
			x[c], x[p] = x[p], x[c]
		}
	}
	for r := 1; r < n; r++ {
		v := x[r]
		row := a[r*n : r*n+r]
		for j, f := range row {
			v -= f * x[j]
		}
		x[r] = v
	}
	for r := n - 1; r >= 0; r-- {
		v := x[r]
		row := a[r*n : r*n+n]
		for j := r + 1; j < n; j++ {
			v -= row[j] * x[j]
		}
		x[r] = v * row[r]
	}
}
