package fit

import "math"

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
