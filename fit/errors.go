package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// judge fills what the curvature at the answer says about its errors.
func (r *Result) judge(set Settings) {
	n := len(r.Params)
	c := newCurvature(r.Jacobian, len(r.Residuals), n, r.fixed())
	r.undetermined = c.undetermined(set.SlopeError)
	r.Directions = c.directions(r.Params, set.SlopeError)
	factor := 1.0
	if !r.ErrorsKnown {
		factor = r.ReducedChiSquare()
	}
	r.Covariance = make([]float64, n*n)
	for a, i := range c.free {
		for b, j := range c.free {
			sum := 0.0
			for k, s := range c.values {
				if !c.open(k, set.SlopeError) {
					sum += c.v.At(a, k) * c.v.At(b, k) / (s * s)
				}
			}
			if sum != 0 {
				r.Covariance[i*n+j] = factor * sum / c.lengths[a] / c.lengths[b]
			}
		}
	}
}

// StandardErrors are the square roots of the diagonal of Covariance: one
// standard deviation for a model that is straight over that range. NaN for
// parameters at a bound or held, which have no such error, and where there
// are no degrees of freedom to take the size of the errors from; +Inf for
// parameters that the data leave open.
func (r *Result) StandardErrors() []float64 {
	n := len(r.Params)
	list := make([]float64, n)
	fixed := r.fixed()
	for j := range list {
		switch {
		case fixed[j]:
			list[j] = math.NaN()
		case r.undetermined[j]:
			list[j] = math.Inf(1)
		default:
			list[j] = math.Sqrt(r.Covariance[j*n+j])
		}
	}
	return list
}

// Correlation is the covariance divided by both standard errors, row-major
// n×n, 1 on the diagonal. NaN where one of them is not a positive number.
func (r *Result) Correlation() []float64 {
	n := len(r.Params)
	list := make([]float64, n*n)
	errors := r.StandardErrors()
	for i := range n {
		for j := range n {
			list[i*n+j] = math.NaN()
			if errors[i] > 0 && errors[j] > 0 && !math.IsInf(errors[i], 1) && !math.IsInf(errors[j], 1) {
				list[i*n+j] = min(max(r.Covariance[i*n+j]/(errors[i]*errors[j]), -1), 1)
			}
		}
		if !math.IsNaN(list[i*n+i]) {
			list[i*n+i] = 1
		}
	}
	return list
}

// lengthBeside is the length of column i of the Jacobian at right angles to the
// columns of all free parameters: the inverse of the standard error that the
// parameter would have if it were free too.
func (r *Result) lengthBeside(i int) float64 {
	n, m := len(r.Params), len(r.Residuals)
	column := func(j int) []float64 {
		c := make([]float64, m)
		for k := range c {
			c[k] = r.Jacobian[k*n+j]
		}
		return c
	}
	var basis [][]float64
	project := func(c []float64) { // twice is enough against rounding
		for range 2 {
			for _, b := range basis {
				floats.AddScaled(c, -floats.Dot(b, c), b)
			}
		}
	}
	for j, fixed := range r.fixed() {
		if fixed || j == i {
			continue
		}
		c := column(j)
		whole := floats.Norm(c, 2)
		project(c)
		if rest := floats.Norm(c, 2); rest > 1e-10*whole {
			floats.Scale(1/rest, c)
			basis = append(basis, c)
		}
	}
	c := column(i)
	project(c)
	return floats.Norm(c, 2)
}
