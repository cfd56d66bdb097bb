package ode

import (
	"fmt"
	"math/big"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// tree is a rooted tree, as the list of the trees that hang on its root, each
// given by its place in the list of all trees.
type tree struct {
	children []int
	order    int
	gamma    *big.Rat // product of the orders of all subtrees
}

// trees lists the rooted trees of up to most nodes, J. C. Butcher, "Numerical
// Methods for Ordinary Differential Equations", section 300.
func trees(most int) []tree {
	all := []tree{{nil, 1, big.NewRat(1, 1)}}
	for order := 2; order <= most; order++ {
		smaller := len(all)
		// Children in falling place, so that every tree comes once.
		var hang func(left, from int, children []int)
		hang = func(left, from int, children []int) {
			if left == 0 {
				g := big.NewRat(int64(order), 1)
				for _, c := range children {
					g.Mul(g, all[c].gamma)
				}
				all = append(all, tree{append([]int(nil), children...), order, g})
				return
			}
			for c := from; c >= 0; c-- {
				if all[c].order <= left {
					hang(left-all[c].order, c, append(children, c))
				}
			}
		}
		hang(order-1, smaller-1, nil)
	}
	return all
}

// The numbers of rooted trees with 1 … 9 nodes: OEIS A000081.
func TestTrees(t *testing.T) {
	count := make([]int, 10)
	for _, x := range trees(9) {
		count[x.order]++
	}
	assert.Equal(t, []int{1, 1, 2, 4, 9, 20, 48, 115, 286}, count[1:])
}

func exact(t testing.TB, s string) *big.Rat {
	r, ok := new(big.Rat).SetString(s)
	require.True(t, ok, s)
	return r
}

func rationals(t testing.TB, row []string) []*big.Rat {
	var out []*big.Rat
	for _, s := range row {
		out = append(out, exact(t, s))
	}
	return out
}

// elementary returns Φ_i of every tree at every stage: the product over the
// children of Σ_j a_ij Φ_j(child).
func elementary(t testing.TB, tab *Tableau, all []tree, digits int) [][]*big.Rat {
	stages := len(tab.Rows)
	a := make([][]*big.Rat, stages)
	for i, row := range tab.Rows {
		a[i] = rationals(t, row)
	}
	phi := make([][]*big.Rat, len(all))
	hung := make([][]*big.Rat, len(all)) // Σ_j a_ij Φ_j
	for x, tr := range all {
		phi[x], hung[x] = make([]*big.Rat, stages), make([]*big.Rat, stages)
		for i := range stages {
			p := big.NewRat(1, 1)
			for _, c := range tr.children {
				p.Mul(p, hung[c][i])
			}
			phi[x][i] = cut(t, p, digits)
			sum := new(big.Rat)
			for j, c := range a[i] {
				sum.Add(sum, new(big.Rat).Mul(c, phi[x][j]))
			}
			hung[x][i] = cut(t, sum, digits)
		}
	}
	return phi
}

// cut rounds x to so many decimals, so that products of decimals stay short;
// digits 0 leaves it exact.
func cut(t testing.TB, x *big.Rat, digits int) *big.Rat {
	if digits == 0 {
		return x
	}
	return exact(t, x.FloatString(digits))
}

// dot returns Σ w_i Φ_i.
func dot(w, phi []*big.Rat) *big.Rat {
	sum := new(big.Rat)
	for i, c := range w {
		sum.Add(sum, new(big.Rat).Mul(c, phi[i]))
	}
	return sum
}

// holds returns the orders up to which Σ w_i Φ_i(tree) = u^order/γ(tree) for
// every tree, within the tolerance.
func holds(all []tree, phi [][]*big.Rat, w []*big.Rat, u, tolerance *big.Rat) int {
	worst := make([]*big.Rat, all[len(all)-1].order+1)
	for x, tr := range all {
		want := new(big.Rat).Inv(tr.gamma)
		for range tr.order {
			want.Mul(want, u)
		}
		off := want.Sub(dot(w, phi[x]), want)
		off.Abs(off)
		if worst[tr.order] == nil || off.Cmp(worst[tr.order]) > 0 {
			worst[tr.order] = off
		}
	}
	for order := 1; order < len(worst); order++ {
		if worst[order].Cmp(tolerance) > 0 {
			return order - 1
		}
	}
	return len(worst) - 1
}

// precision returns the tolerance of a tableau and the decimals to calculate
// with: fractions must fulfil conditions exactly. The decimals of the other one
// have 30 digits with factors of up to 43; its dense output is of 29 digits with
// coefficients of up to 528.
func precision(t testing.TB, tab *Tableau) (weights, dense *big.Rat, digits int) {
	switch tab {
	case DormandPrince54:
		return new(big.Rat), new(big.Rat), 0
	case DormandPrince853:
		return exact(t, "1e-26"), exact(t, "1e-24"), 60
	}
	t.Fatalf("%s: state how exact its coefficients are", tab.Name)
	return nil, nil, 0
}

// Every order condition of the step, of the embedded methods and of the dense
// output, and that there is none beyond: Hairer, Nørsett, Wanner, Solving
// Ordinary Differential Equations I, theorems II.2.13 and II.6.1.
func TestOrderConditions(t *testing.T) {
	one := big.NewRat(1, 1)
	for _, tab := range Tableaux {
		t.Run(tab.Name, func(t *testing.T) {
			tolerance, loose, digits := precision(t, tab)
			all := trees(tab.Order + 1)
			phi := elementary(t, tab, all, digits)
			weights := rationals(t, tab.Rows[tab.Stages-1])
			assert.Equal(t, tab.Order, holds(all, phi, weights, one, tolerance), "step")
			for _, e := range tab.Errors {
				w := rationals(t, e.Weights)
				require.Len(t, w, tab.Stages)
				embedded := make([]*big.Rat, tab.Stages)
				for i := range embedded {
					embedded[i] = new(big.Rat).Neg(w[i])
					if i < len(weights) {
						embedded[i].Add(embedded[i], weights[i])
					}
				}
				assert.Equal(t, e.Order, holds(all, phi, embedded, one, tolerance), "embedded method of order %d", e.Order)
			}
			for _, u := range []*big.Rat{big.NewRat(1, 5), big.NewRat(1, 2), big.NewRat(7, 9)} {
				assert.Equal(t, tab.Within, holds(all, phi, denseWeights(t, tab, u), u, loose), "dense output at %v", u)
			}
			for _, u := range []*big.Rat{new(big.Rat), one} {
				assert.GreaterOrEqual(t, holds(all, phi, denseWeights(t, tab, u), u, loose), tab.Order, "dense output at %v", u)
			}
		})
	}
}

// denseWeights returns b_i(u) of y(u) = y₀ + h Σ b_i(u) k_i, by the formulas
// written out at Solver.prepare and Solver.within.
func denseWeights(t testing.TB, tab *Tableau, u *big.Rat) []*big.Rat {
	stages, last := len(tab.Rows), tab.Stages-1
	unit := func(i int) []*big.Rat {
		w := make([]*big.Rat, stages)
		for j := range w {
			w[j] = new(big.Rat)
		}
		if i >= 0 {
			w[i].SetInt64(1)
		}
		return w
	}
	minus := func(a, b []*big.Rat) []*big.Rat {
		w := unit(-1)
		for i := range w {
			w[i].Sub(a[i], b[i])
		}
		return w
	}
	r1 := unit(-1)
	for i, c := range rationals(t, tab.Rows[last]) {
		r1[i].Set(c)
	}
	r2 := minus(unit(0), r1)
	r := [][]*big.Rat{r1, r2, minus(minus(r1, unit(last)), r2)}
	for _, row := range tab.Dense {
		w := unit(-1)
		for i, c := range rationals(t, row) {
			w[i].Set(c)
		}
		r = append(r, w)
	}
	out, factor := unit(-1), big.NewRat(1, 1)
	for m, w := range r {
		x := u
		if m%2 == 1 {
			x = new(big.Rat).Sub(big.NewRat(1, 1), u)
		}
		factor = new(big.Rat).Mul(factor, x)
		for i := range out {
			out[i].Add(out[i], new(big.Rat).Mul(factor, w[i]))
		}
	}
	return out
}

// Shapes, and c_i = Σ a_ij, by which a method treats t as it would one more y.
func TestTableaux(t *testing.T) {
	for _, tab := range Tableaux {
		tolerance, _, _ := precision(t, tab)
		require.Len(t, tab.Nodes, len(tab.Rows), tab.Name)
		assert.Equal(t, "1", tab.Nodes[tab.Stages-1])
		for i, row := range tab.Rows {
			require.Len(t, row, i, "%s row %d", tab.Name, i)
			sum := exact(t, tab.Nodes[i])
			for _, a := range rationals(t, row) {
				sum.Sub(sum, a)
			}
			assert.LessOrEqual(t, sum.Abs(sum).Cmp(tolerance), 0, fmt.Sprintf("%s row %d: %v", tab.Name, i, sum))
		}
		for _, row := range tab.Dense {
			assert.Len(t, row, len(tab.Rows))
		}
	}
}
