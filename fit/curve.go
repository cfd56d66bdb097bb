package fit

import (
	"fmt"
	"math"
)

// A Curve is data y at x with a function of parameters to pass through them.
type Curve struct {
	X, Y []float64
	// Sigma holds the standard deviations of Y. Default (nil): equal ones of
	// unknown size, estimated from the scatter.
	Sigma []float64
	// F is the function at x for the parameters.
	F func(x float64, params []float64) float64
	// Slopes sets slopes[j] to ∂F/∂params[j]. Default (nil): differences, to
	// nearly all digits (Differences).
	Slopes func(x float64, params, slopes []float64)
}

// Fit passes the curve through the data by LeastSquares. The settings'
// ErrorsKnown is set where Sigma is given.
func (c Curve) Fit(start []float64, settings *Settings) (*Result, error) {
	model, err := c.Model()
	if err != nil {
		return nil, err
	}
	var s Settings
	if settings != nil {
		s = *settings
	}
	s.ErrorsKnown = s.ErrorsKnown || c.Sigma != nil
	return LeastSquares(model, len(c.X), start, &s)
}

// Model gives the residuals (F(x) − y)/σ and their slopes.
func (c Curve) Model() (Model, error) {
	if len(c.X) != len(c.Y) {
		return nil, fmt.Errorf("fit: %d values of x and %d of y; each point needs both", len(c.X), len(c.Y))
	}
	if c.Sigma != nil && len(c.Sigma) != len(c.Y) {
		return nil, fmt.Errorf("fit: %d standard deviations for %d points", len(c.Sigma), len(c.Y))
	}
	if c.F == nil {
		return nil, fmt.Errorf("fit: the curve has no function F")
	}
	for i := range c.X {
		if math.IsNaN(c.X[i]+c.Y[i]) || math.IsInf(c.X[i], 0) || math.IsInf(c.Y[i], 0) {
			return nil, fmt.Errorf("fit: point %d is (%g, %g); leave out points that are not finite", i, c.X[i], c.Y[i])
		}
		if c.Sigma != nil && (!(c.Sigma[i] > 0) || math.IsInf(c.Sigma[i], 1)) {
			return nil, fmt.Errorf("fit: point %d has the standard deviation %g; it must be positive", i, c.Sigma[i])
		}
	}
	residuals := func(params, r []float64) error {
		for i, x := range c.X {
			r[i] = c.F(x, params) - c.Y[i]
			if c.Sigma != nil {
				r[i] /= c.Sigma[i]
			}
		}
		return nil
	}
	if c.Slopes == nil {
		return Differences(residuals), nil
	}
	return func(params, r, jacobian []float64) error {
		if jacobian != nil {
			n := len(params)
			for i, x := range c.X {
				row := jacobian[i*n : i*n+n]
				c.Slopes(x, params, row)
				if c.Sigma != nil {
					for j := range row {
						row[j] /= c.Sigma[i]
					}
				}
			}
		}
		return residuals(params, r)
	}, nil
}
