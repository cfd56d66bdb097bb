package fit

import (
	"math"
	"math/bits"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Upper critical values of the chi-square distribution, NIST/SEMATECH
// e-Handbook of Statistical Methods, section 1.3.6.7.4 (three decimals).
func TestChiSquareProbability(t *testing.T) {
	for _, c := range []struct {
		dof         int
		critical, p float64
	}{
		{1, 3.841, 0.05}, {1, 6.635, 0.01}, {10, 18.307, 0.05}, {10, 29.588, 0.001}, {100, 124.342, 0.05}, {100, 77.929, 0.95},
	} {
		// Half a unit of the last decimal moves the probability by less than 3e-4 of it.
		assert.InEpsilon(t, c.p, ChiSquareProbability(c.critical, c.dof), 5e-4)
	}
	// Two degrees of freedom: e^{−χ²/2}, far into the tail too.
	assert.InEpsilon(t, math.Exp(-100), ChiSquareProbability(200, 2), 1e-12)
	assert.Equal(t, 1.0, ChiSquareProbability(0, 3))
	assert.True(t, math.IsNaN(ChiSquareProbability(1, 0)))
}

// All orders of a and b signs, counted.
func TestRunsAgainstEnumeration(t *testing.T) {
	const n = 11
	for a := 1; a < n; a++ {
		count, total := make([]float64, n+1), 0.0
		for code := range uint(1 << n) {
			if bits.OnesCount(code) == a {
				count[1+bits.OnesCount((code^(code>>1))&(1<<(n-1)-1))]++
				total++
			}
		}
		for runs, c := range count {
			if runs >= 2 {
				assert.InDelta(t, c/total, runsProbability(runs, a, n-a), 1e-13)
			}
		}
	}
}

// Critical numbers of runs at 2.5 % on either side: F. S. Swed, C. Eisenhart,
// Ann. Math. Stat. 14, 66 (1943) (from memory).
func TestRunsCriticalValues(t *testing.T) {
	for _, c := range []struct{ each, few, many int }{{5, 2, 10}, {10, 6, 16}, {12, 7, 19}, {15, 10, 22}, {20, 14, 28}} {
		few, many := 0.0, 0.0
		for r := 2; r <= c.few; r++ {
			few += runsProbability(r, c.each, c.each)
		}
		for r := c.many; r <= 2*c.each; r++ {
			many += runsProbability(r, c.each, c.each)
		}
		assert.LessOrEqual(t, few, 0.025)
		assert.Greater(t, few+runsProbability(c.few+1, c.each, c.each), 0.025)
		assert.LessOrEqual(t, many, 0.025)
		assert.Greater(t, many+runsProbability(c.many-1, c.each, c.each), 0.025)
	}
}

func TestRunsTest(t *testing.T) {
	r := RunsTest([]float64{1, 2, 0, 3, -1, -1, math.NaN(), 2, -5})
	assert.Equal(t, 4, r.Runs)
	assert.Equal(t, 4, r.Positive)
	assert.Equal(t, 3, r.Negative)
	assert.InDelta(t, 1+24.0/7, r.Expected, 1e-14)
	assert.True(t, r.Exact)
	// Of the 35 orders of 4 and 3 signs, 5+... have at most four runs: 2 with
	// two, 5 with three, 12 with four.
	assert.InDelta(t, 19.0/35, r.TooFew, 1e-13)
	assert.InDelta(t, 28.0/35, r.TooMany, 1e-13)

	for _, one := range [][]float64{nil, {0, 0}, {1, 2, 3}} {
		r := RunsTest(one)
		assert.Equal(t, 1.0, r.TwoSided())
	}
	// The normal form takes over where it agrees with counting: 100 and 101
	// signs, 85 runs, differ by less than a hundredth of the probability.
	long := make([]float64, 0, 201)
	for i := range 201 {
		long = append(long, map[bool]float64{true: 1, false: -1}[i*85/201%2 == 0])
	}
	n := RunsTest(long)
	require.False(t, n.Exact)
	exact := 0.0
	for runs := 2; runs <= n.Runs; runs++ {
		exact += runsProbability(runs, n.Positive, n.Negative)
	}
	assert.InEpsilon(t, exact, n.TooFew, 0.02)
}

// The univariate problems NumAcc1 to 4 of the Statistical Reference Datasets
// (NIST; exact lag-1 autocorrelations, from memory): −0.5, and −0.999 three
// times.
func TestAutocorrelation(t *testing.T) {
	assert.Equal(t, -0.5, Autocorrelation([]float64{10000001, 10000003, 10000002}))
	for _, base := range []float64{1.2, 1000000.2, 10000000.2} {
		y := []float64{base}
		for range 500 {
			y = append(y, base-0.1, base+0.1)
		}
		assert.InEpsilon(t, -0.999, Autocorrelation(y), 1e-7) // base ± 0.1 is rounded to 2e-9
	}
	assert.True(t, math.IsNaN(Autocorrelation([]float64{2, 2, 2})))
	assert.True(t, math.IsNaN(Autocorrelation(nil)))
}

func TestScatter(t *testing.T) {
	// A straight line at uneven points has none; of three points with the
	// middle one off by 1, ε² = 1/(¼+¼+1).
	assert.InDelta(t, 0, Scatter([]float64{0, 1, 3, 3.5, 9}, []float64{1, 3, 7, 8, 19}), 1e-14)
	assert.InDelta(t, math.Sqrt(2.0/3), Scatter([]float64{0, 1, 2}, []float64{0, 1, 0}), 1e-15)
	assert.InDelta(t, 0, Scatter([]float64{1, 1, 1}, []float64{2, 2, 2}), 0)
	assert.True(t, math.IsNaN(Scatter([]float64{1, 2}, []float64{1, 2})))
	// Noise of known size on a slow sine: within the estimator's own error,
	// about √(35/18n) (Gasser et al.).
	rng := rand.New(rand.NewPCG(3, 3))
	var x, y []float64
	for i := range 4000 {
		x = append(x, float64(i)+0.3*rng.Float64())
		y = append(y, math.Sin(float64(i)/300)+0.25*rng.NormFloat64())
	}
	assert.InEpsilon(t, 0.25, Scatter(x, y), 3*math.Sqrt(35.0/18/4000)/2)
}
