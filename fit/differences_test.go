package fit

import (
	"errors"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Slopes of functions with known ones, among them a line far narrower than an
// eighth of the parameter, steps past the end of a domain, a parameter of 0 and
// a large offset that costs digits.
func TestDifferences(t *testing.T) {
	for _, f := range []struct {
		name         string
		value, slope func(p float64) float64
		at           float64
		tolerance    float64 // relative
	}{
		{"exponential", math.Exp, math.Exp, 3, 1e-12},
		{"at zero", math.Sin, math.Cos, 0, 1e-12},
		{"narrow line", func(p float64) float64 { return math.Exp(-(p - 450) * (p - 450) / 32) },
			func(p float64) float64 { return -(p - 450) / 16 * math.Exp(-(p-450)*(p-450)/32) }, 452, 1e-10},
		{"end of the domain", math.Log1p, func(p float64) float64 { return 1 / (1 + p) }, -0.95, 1e-11},
		{"fast sine", func(p float64) float64 { return math.Sin(50 * p) }, func(p float64) float64 { return 50 * math.Cos(50*p) }, 7.1, 1e-10},
		// 1e5 leaves eleven of sixteen digits, and differences one less.
		{"large offset", func(p float64) float64 { return 1e5 + math.Sqrt(p) }, func(p float64) float64 { return 0.5 / math.Sqrt(p) }, 2, 1e-9},
	} {
		model := Differences(func(p, r []float64) error { r[0], r[1] = f.value(p[0]), 7; return nil })
		r, jac := make([]float64, 2), make([]float64, 2)
		require.NoError(t, model([]float64{f.at}, r, jac))
		assert.InEpsilon(t, f.slope(f.at), jac[0], f.tolerance, f.name)
		assert.Zero(t, jac[1], f.name)
		assert.Equal(t, f.value(f.at), r[0])
	}
}

func TestDifferencesErrors(t *testing.T) {
	model := Differences(func(p, r []float64) error {
		if p[0] > 1 {
			return errors.New("past one")
		}
		r[0] = math.NaN()
		return nil
	})
	r, jac := make([]float64, 1), make([]float64, 1)
	assert.ErrorContains(t, model([]float64{1}, r, jac), "past one")
	require.NoError(t, model([]float64{0.5}, r, jac))
	assert.True(t, math.IsNaN(jac[0]))
}
