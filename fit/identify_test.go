package fit

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// The straight line with known errors has its covariance in every handbook:
// with S = Σ1/σ², Sx, Sxx, Δ = S·Sxx − Sx²: var a = Sxx/Δ, var b = S/Δ,
// cov = −Sx/Δ.
func TestErrorsOfAStraightLine(t *testing.T) {
	c := Curve{
		X: []float64{1, 2, 4, 7}, Y: []float64{2.1, 3.8, 8.3, 13.9}, Sigma: []float64{0.1, 0.2, 0.2, 0.4},
		F: func(x float64, p []float64) float64 { return p[0] + p[1]*x },
	}
	var s, sx, sxx float64
	for i, x := range c.X {
		w := 1 / (c.Sigma[i] * c.Sigma[i])
		s, sx, sxx = s+w, sx+w*x, sxx+w*x*x
	}
	det := s*sxx - sx*sx
	res, err := c.Fit([]float64{0.5, 0.5}, nil)
	require.NoError(t, err)
	assert.InEpsilonSlice(t, []float64{sxx / det, -sx / det, -sx / det, s / det}, res.Covariance, 1e-10)
	assert.InEpsilon(t, -sx/math.Sqrt(s*sxx), res.Correlation()[1], 1e-10)
	assert.Equal(t, 1.0, res.Correlation()[3])
	assert.Equal(t, 2, res.DegreesOfFreedom)
	assert.InDelta(t, res.ChiSquare/2, res.ReducedChiSquare(), 1e-15)

	// All errors ten times larger: so are those of the answer. Unknown ones
	// take their size from the scatter, whatever was given.
	for i := range c.Sigma {
		c.Sigma[i] *= 10
	}
	wide, err := c.Fit([]float64{0.5, 0.5}, nil)
	require.NoError(t, err)
	assert.InEpsilon(t, 10*res.StandardErrors()[1], wide.StandardErrors()[1], 1e-9)
	model, err := c.Model()
	require.NoError(t, err)
	scaled, err := LeastSquares(model, 4, []float64{0.5, 0.5}, nil)
	require.NoError(t, err)
	assert.InEpsilon(t, res.StandardErrors()[1]*math.Sqrt(res.ReducedChiSquare()), scaled.StandardErrors()[1], 1e-9)
}

func TestDirectionsInWords(t *testing.T) {
	x := []float64{0, 1, 2, 3, 4, 5, 6, 7}
	var y []float64
	for i, x := range x {
		y = append(y, 3*math.Exp(-0.3*x)+0.01*float64(i%3))
	}
	// Two rates that act by their sum only, and a parameter without effect.
	c := Curve{X: x, Y: y, F: func(x float64, p []float64) float64 { return p[0] * math.Exp(-(p[1]+p[2])*x) }}
	res, err := c.Fit([]float64{2, 0.2, 0.2, 7}, nil)
	require.NoError(t, err)
	se := res.StandardErrors()
	assert.True(t, se[0] < 0.1, se[0])
	assert.True(t, math.IsInf(se[1], 1) && math.IsInf(se[2], 1) && math.IsInf(se[3], 1))
	assert.True(t, math.IsNaN(res.Correlation()[1*4+2]))
	require.Len(t, res.Directions, 2)
	names := []string{"amplitude", "spont", "field", "idle"}
	words := []string{res.Directions[0].Words(names), res.Directions[1].Words(names)}
	assert.Contains(t, words, "idle changes nothing in these data")
	pair := words[0]
	if pair == "idle changes nothing in these data" {
		pair = words[1]
	}
	assert.Regexp(t, `^these data fix (spont and field|field and spont) only together: turning (spont|field) by \+[\d.e-]+ % with (spont|field) by -[\d.e-]+ % changes nothing$`, pair)
	// The sum itself is known: as well as in a fit with one rate.
	one := Curve{X: x, Y: y, F: func(x float64, p []float64) float64 { return p[0] * math.Exp(-p[1]*x) }}
	single, err := one.Fit([]float64{2, 0.4}, nil)
	require.NoError(t, err)
	assert.InEpsilon(t, single.Params[1], res.Params[1]+res.Params[2], 1e-9)

	// Nearly together: amplitude and rate of a short stretch of an exponential
	// with a free offset.
	var start []float64
	for i, x := range x {
		start = append(start, 3*math.Exp(-0.03*x)+1e-4*float64(i%3))
	}
	short := Curve{X: x, Y: start, F: func(x float64, p []float64) float64 { return p[2] + p[0]*math.Exp(-p[1]*x) }}
	weak, err := short.Fit([]float64{3, 0.03, 0}, nil)
	require.NoError(t, err)
	require.NotEmpty(t, weak.Directions)
	assert.Contains(t, weak.Directions[0].Words([]string{"a", "b", "c"}), "only together")
	assert.Contains(t, weak.Directions[0].Words([]string{"a", "b", "c"}), "hardly changes the fit")
	assert.Greater(t, weak.Directions[0].Condition, 30.0)

	// A well-posed problem has no such words.
	assert.Empty(t, single.Directions)
}

// Fewer data than parameters: an answer, with every error open or unknown.
func TestTooFewPoints(t *testing.T) {
	c := Curve{X: []float64{1}, Y: []float64{5}, F: func(x float64, p []float64) float64 { return p[0] + p[1]*x }}
	res, err := c.Fit([]float64{1, 1}, nil)
	require.NoError(t, err)
	assert.InDelta(t, 5, res.Params[0]+res.Params[1], 1e-12)
	assert.True(t, math.IsNaN(res.ReducedChiSquare()))
	assert.True(t, math.IsInf(res.StandardErrors()[0], 1))
}

// Nothing to fit: the residuals as they are.
func TestNoParameters(t *testing.T) {
	c := Curve{X: []float64{1, 2}, Y: []float64{1, 2}, F: func(x float64, p []float64) float64 { return 0 }}
	res, err := c.Fit(nil, nil)
	require.NoError(t, err)
	assert.Equal(t, 5.0, res.ChiSquare)
	assert.Equal(t, 2, res.DegreesOfFreedom)
	assert.Empty(t, res.Covariance)
}
