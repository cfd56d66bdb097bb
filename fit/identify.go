package fit

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"
)

// A Direction is a combination of parameters that the data fix badly.
type Direction struct {
	// Condition is the largest singular value of the Jacobian, its columns
	// scaled to length one, over that of this direction: how much worse than
	// the best one it is known. Inf where nothing but rounding is left.
	Condition float64
	// Params are the parameters that take part, most first, and Parts their
	// changes along the direction: relative ones, δp/|p|, or absolute where p
	// is 0, scaled so that the largest relative one is ±1.
	Params []int
	Parts  []float64
	// Relative tells for each part which of the two it is.
	Relative []bool
}

// weakCondition is the condition index from which a direction is reported:
// "strong" in D. A. Belsley, E. Kuh, R. E. Welsch, Regression Diagnostics
// (Wiley, 1980), chapter 3.
const weakCondition = 30

// Words says what the direction means for parameters of these names.
func (d Direction) Words(names []string) string {
	if len(d.Params) == 1 {
		return names[d.Params[0]] + " changes nothing in these data"
	}
	size := 1.0
	if slices.Contains(d.Relative, true) {
		size = 0.01
	}
	var list, moves []string
	for k, j := range d.Params {
		list = append(list, names[j])
		if d.Relative[k] {
			moves = append(moves, fmt.Sprintf("%s by %+.2g %%", names[j], d.Parts[k]))
		} else {
			moves = append(moves, fmt.Sprintf("%s by %+.2g", names[j], size*d.Parts[k]))
		}
	}
	together := strings.Join(list[:len(list)-1], ", ") + " and " + list[len(list)-1]
	effect := "hardly changes the fit"
	if math.IsInf(d.Condition, 1) {
		effect = "changes nothing"
	}
	return fmt.Sprintf("these data fix %s only together: turning %s %s", together, strings.Join(moves, " with "), effect)
}

// curvature is the singular value decomposition of a Jacobian whose columns
// are scaled to length one, for the free parameters.
type curvature struct {
	free    []int
	lengths []float64 // of the columns
	values  []float64 // largest first
	v       mat.Dense // parameter × value
	n       int
}

func newCurvature(jacobian []float64, m, n int, fixed []bool) *curvature {
	c := &curvature{n: n}
	for j, f := range fixed {
		if !f {
			c.free = append(c.free, j)
		}
	}
	k := len(c.free)
	if k == 0 {
		return c
	}
	c.lengths = make([]float64, k)
	a := mat.NewDense(max(m, k), k, nil) // rows of zeros where data are few
	for b, j := range c.free {
		for i := range m {
			c.lengths[b] = math.Hypot(c.lengths[b], jacobian[i*n+j])
		}
		if c.lengths[b] > 0 {
			for i := range m {
				a.Set(i, b, jacobian[i*n+j]/c.lengths[b])
			}
		}
	}
	if m > k {
		var qr mat.QR
		qr.Factorize(a)
		var r mat.Dense
		qr.RTo(&r)
		a = mat.DenseCopyOf(r.Slice(0, k, 0, k))
	}
	var u mat.Dense
	c.values = decompose(a, &u, &c.v)
	return c
}

// open tells that direction k holds nothing but the error of the slopes.
func (c *curvature) open(k int, slopeError float64) bool {
	return c.values[k] <= slopeError*c.values[0]
}

// undetermined tells for each of the n parameters whether it moves along an
// open direction.
func (c *curvature) undetermined(slopeError float64) []bool {
	list := make([]bool, c.n)
	for k := range c.values {
		if c.open(k, slopeError) {
			for b, j := range c.free {
				list[j] = list[j] || math.Abs(c.v.At(b, k)) > 1e-8
			}
		}
	}
	return list
}

// directions lists those with a condition index of weakCondition or more,
// worst first.
func (c *curvature) directions(params []float64, slopeError float64) []Direction {
	var list []Direction
	for k := len(c.values) - 1; k >= 0; k-- {
		d := Direction{Condition: c.values[0] / c.values[k]}
		if c.open(k, slopeError) {
			d.Condition = math.Inf(1)
		}
		if d.Condition < weakCondition {
			break
		}
		most := 0.0
		for b := range c.free {
			most = max(most, math.Abs(c.v.At(b, k)))
		}
		var order []int
		for b := range c.free {
			// A fifth of the largest part: less would not change the words.
			if math.Abs(c.v.At(b, k)) >= 0.2*most {
				order = append(order, b)
			}
		}
		slices.SortStableFunc(order, func(a, b int) int {
			return cmp.Compare(math.Abs(c.v.At(b, k)), math.Abs(c.v.At(a, k)))
		})
		largest, largestRelative := 0.0, 0.0
		for _, b := range order {
			j := c.free[b]
			part, relative := c.v.At(b, k), params[j] != 0
			if c.lengths[b] > 0 {
				part /= c.lengths[b]
			}
			if relative {
				part /= math.Abs(params[j])
				largestRelative = max(largestRelative, math.Abs(part))
			}
			largest = max(largest, math.Abs(part))
			d.Params, d.Parts, d.Relative = append(d.Params, j), append(d.Parts, part), append(d.Relative, relative)
		}
		if largestRelative > 0 {
			largest = largestRelative
		}
		if d.Parts[0] < 0 {
			largest = -largest
		}
		for i := range d.Parts {
			d.Parts[i] /= largest
		}
		list = append(list, d)
	}
	return list
}
