package lindblad

import (
	"context"
	"errors"
	"fmt"
	"math"
)

// Steady returns the state to which an order leads when it is repeated without
// end, and whether every start leads there. For one constant stretch that is
// its steady state, Lx = 0 with Tr ρ = Tr ρ(0), whatever it lasts; otherwise
// the state that one pass leaves as it was. When there are several, x is the
// one that the start state x0 leads to (its average over the passes, should
// something turn for ever). dx holds the slopes along the directions of the
// stretches. Counters are zero: they grow without end.
//
// Unique: the direct solution of Lx = 0, one equation replaced by the trace,
// refined. Else: the null spaces of L and of its transpose, x = R (WᵀR)⁻¹ Wᵀ x0,
// from the singular value decomposition by rotations (Jacobi's one-sided
// method). Errors: rotors that are not back at their start after one pass, a
// system too large, slopes of a state that is not the only one.
func (s *Solver) Steady(ctx context.Context, x0 []float64, stretches []Stretch, order []Node) (x []float64, dx [][]float64, unique bool, err error) {
	fail := func(text string) ([]float64, [][]float64, bool, error) {
		return nil, nil, false, errors.New("lindblad: " + text)
	}
	l := s.l
	if len(order) == 0 {
		return fail("an empty order has no steady state")
	}
	if err := s.begin(ctx, x0, nil, stretches, order, Record{During: -1}); err != nil {
		return nil, nil, false, err
	}
	if len(l.pops) == 0 || !(s.trace > 0) {
		return fail("the start state has no trace")
	}
	n := l.reach
	if n > 4000 {
		return fail(fmt.Sprintf("a steady state of %d coordinates is too large to solve for; ask for a finite time", n))
	}
	parts := make([][]float64, 1+s.k) // L and its slopes
	var only *Stretch
	if len(order) == 1 && order[0].Group == nil {
		only = &s.stretches[order[0].Stretch]
	}
	if st := only; st != nil && !st.Ideal && len(st.Terms) == 0 {
		vals := s.needVals()
		for q := range parts {
			parts[q] = make([]float64, n*n)
			coef := st.Coef
			if q > 0 {
				if q > len(st.Slopes) || st.Slopes[q-1].Coef == nil {
					continue
				}
				coef = st.Slopes[q-1].Coef
			}
			l.generator(vals, coef)
			for i := 0; i < n; i++ {
				for e := l.start[i]; e < l.start[i+1]; e++ {
					parts[q][i*n+int(l.col[e])] = vals[e]
				}
			}
		}
	} else {
		m, err := s.orderMap(new(full), order)
		if err != nil {
			return nil, nil, false, err
		}
		for _, t := range s.theta {
			if math.Abs(math.Remainder(t, 2*math.Pi)) > 1e-9 {
				return fail("a rotor is not back at its start after one pass of the order, so there is no steady state; change its frequency or the durations")
			}
		}
		for q := range parts {
			parts[q] = make([]float64, n*n)
			for i := 0; i < n && m.n > 0; i++ {
				lo, hi := 0, n
				if m.n > smallest {
					lo, hi = int(m.lo[i/4]), min(int(m.hi[i/4]), n)
				}
				if lo < hi {
					copy(parts[q][i*n+lo:i*n+hi], m.part(q)[i*m.m+lo:i*m.m+hi])
				}
			}
		}
	}
	x = make([]float64, l.n)
	direct := newDirect(l, parts[0])
	unique = direct != nil && direct.state(x[:n], s.trace)
	if !unique {
		if s.k > 0 {
			return fail("the steady state is not the only one, so it has no slopes")
		}
		if err := steadyReached(l, parts[0], x[:n], x0[:n]); err != nil {
			return nil, nil, false, err
		}
	}
	s.guard(x)
	for q := 1; q <= s.k; q++ { // L x_j = −L_j x
		d := make([]float64, l.n)
		for i := 0; i < n; i++ {
			for j, v := range parts[q][i*n : i*n+n] {
				d[i] -= v * x[j]
			}
		}
		direct.slope(d[:n])
		dx = append(dx, d)
	}
	return x, dx, unique, nil
}

// orderMap multiplies the maps of an order onto m, shaped stretches too, and
// moves the rotors on.
func (s *Solver) orderMap(m *full, order []Node) (*full, error) {
	var err error
	for i := range order {
		node := &order[i]
		if node.Group == nil {
			s.fold(node.Stretch)
			st := &s.stretches[node.Stretch]
			switch {
			case len(st.Terms) == 0 && s.l.n <= denseLimit:
				m = s.chain(s.stretchMap(node.Stretch), m)
			case s.k > 0:
				return nil, errors.New("lindblad: slopes of a steady state with shaped stretches are not available")
			case st.Lasts > 0:
				if err = s.layCells(st, 0, st.Lasts, 1); err != nil {
					return nil, err
				}
				c := new(full)
				c.copyFrom(&s.periods.cells[0])
				m = s.chain(c, m)
			}
			if !st.Ideal {
				s.pass(st)
			}
			continue
		}
		for range node.Repeat {
			if len(node.Group) == 0 {
				break
			}
			if s.group(node).exact {
				m = s.compose(m, order[i:i+1])
				s.passGroup(node.Group, node.Repeat)
				break
			}
			if m, err = s.orderMap(m, node.Group); err != nil {
				return nil, err
			}
		}
	}
	return m, nil
}

// direct solves Lx = b with the trace of x given: the equation of the first
// population is left out, since the others imply it.
type direct struct {
	n, row     int
	scale      []float64
	matrix, lu []float64
	pivot      []int
}

// newDirect is nil when L has more than one null vector to working precision.
func newDirect(l *Layout, a []float64) *direct {
	n := l.reach
	d := &direct{n: n, row: int(l.pops[0]), scale: make([]float64, n), pivot: make([]int, n)}
	d.matrix = append([]float64(nil), a...)
	for i := range d.scale { // rows of size one, so that pivots compare
		if v := largest(a[i*n : i*n+n]); v > 0 {
			d.scale[i] = 1 / v
			for j := i * n; j < i*n+n; j++ {
				d.matrix[j] *= d.scale[i]
			}
		}
	}
	clear(d.matrix[d.row*n : d.row*n+n])
	for _, p := range l.pops {
		d.matrix[d.row*n+int(p)] = 1
	}
	d.lu = append([]float64(nil), d.matrix...)
	if !factor(d.lu, d.pivot, n) {
		return nil
	}
	// A second null vector shows as a huge solution for most right sides.
	probe := make([]float64, n)
	for try := 0; try < 3; try++ {
		for i := range probe {
			probe[i] = 1
			if (i*(2*try+7)+try*3)%5 < 2 {
				probe[i] = -1
			}
		}
		solve(d.lu, d.pivot, n, probe)
		if v := largest(probe); !(v < 1e13) {
			return nil
		}
	}
	return d
}

// state solves Lx = 0 with the given trace.
func (d *direct) state(x []float64, trace float64) bool {
	clear(x)
	x[d.row] = trace
	d.solve(x)
	return allFinite(x)
}

// slope solves Lx = b without trace; b is replaced.
func (d *direct) slope(b []float64) {
	for i, f := range d.scale {
		b[i] *= f
	}
	b[d.row] = 0
	d.solve(b)
}

// solve refines twice with residuals that are exact to twice the digits.
func (d *direct) solve(x []float64) {
	b := append([]float64(nil), x...)
	solve(d.lu, d.pivot, d.n, x)
	r := make([]float64, d.n)
	for refine := 0; refine < 2; refine++ {
		for i := range r {
			s, c := b[i], 0.0
			for j, v := range d.matrix[i*d.n : i*d.n+d.n] {
				p := -v * x[j]
				low := math.FMA(-v, x[j], -p)
				t := s + p
				u := t - s
				c += (s - (t - u)) + (p - u) + low
				s = t
			}
			r[i] = s + c
		}
		solve(d.lu, d.pivot, d.n, r)
		for i, v := range r {
			x[i] += v
		}
	}
}

// steadyReached projects x0 on the null space of a along its range.
func steadyReached(l *Layout, a, x, x0 []float64) error {
	n := l.reach
	if n > denseLimit {
		return fmt.Errorf("lindblad: the steady state is not unique and the system of %d coordinates too large to find the one that is reached", n)
	}
	right := nullSpace(a, n)
	t := make([]float64, n*n)
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			t[j*n+i] = a[i*n+j]
		}
	}
	left := nullSpace(t, n)
	k := len(right)
	if k == 0 || len(left) != k {
		return errors.New("lindblad: the steady state cannot be told from slow relaxation; ask for a finite time")
	}
	// (WᵀR) c = Wᵀ x0
	m, c, pivot := make([]float64, k*k), make([]float64, k), make([]int, k)
	for i, w := range left {
		for j, r := range right {
			for q := range w {
				m[i*k+j] += w[q] * r[q]
			}
		}
		for q := range w {
			c[i] += w[q] * x0[q]
		}
	}
	if !factor(m, pivot, k) {
		return errors.New("lindblad: the steady state cannot be told from slow relaxation; ask for a finite time")
	}
	solve(m, pivot, k, c)
	clear(x)
	for j, r := range right {
		for q := range r {
			x[q] += c[j] * r[q]
		}
	}
	l.setTrace(x, l.trace(x0))
	return nil
}

// nullSpace returns orthonormal vectors v with av = 0 to working precision, by
// one-sided Jacobi rotations of the columns of a.
func nullSpace(a []float64, n int) [][]float64 {
	// columns stand in rows here
	u, v := make([][]float64, n), make([][]float64, n)
	for j := range u {
		u[j], v[j] = make([]float64, n), make([]float64, n)
		v[j][j] = 1
		for i := range u[j] {
			u[j][i] = a[i*n+j]
		}
	}
	inner := func(x, y []float64) (s float64) {
		for i, p := range x {
			s += p * y[i]
		}
		return s
	}
	for sweep := 0; sweep < 60; sweep++ {
		turned := false
		for p := 0; p < n; p++ {
			for q := p + 1; q < n; q++ {
				x, y, z := inner(u[p], u[p]), inner(u[q], u[q]), inner(u[p], u[q])
				if math.Abs(z) <= 1e-15*math.Sqrt(x*y) || z == 0 {
					continue
				}
				turned = true
				theta := (y - x) / (2 * z)
				t := 1 / (math.Abs(theta) + math.Sqrt(theta*theta+1))
				if theta < 0 {
					t = -t
				}
				c := 1 / math.Sqrt(t*t+1)
				s := t * c
				for _, m := range [][2][]float64{{u[p], u[q]}, {v[p], v[q]}} {
					for i, b := range m[1] {
						a := m[0][i]
						m[0][i], m[1][i] = c*a-s*b, s*a+c*b
					}
				}
			}
		}
		if !turned {
			break
		}
	}
	var most float64
	for _, x := range u {
		most = math.Max(most, math.Sqrt(inner(x, x)))
	}
	var out [][]float64
	for j, x := range u {
		if math.Sqrt(inner(x, x)) <= 1e-14*float64(n)*most {
			out = append(out, v[j])
		}
	}
	return out
}
