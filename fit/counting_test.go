package fit

import (
	"math"
	"math/big"
	"testing"

	"github.com/stretchr/testify/assert"
)

// Jeffreys intervals at 95 %, computed once with general numerical libraries
// (mpmath, scipy) to twelve decimals; the cases of 81/263 to 1/29 are those of
// R. G. Newcombe, Stat. Med. 17, 857 (1998).
func TestCountInterval(t *testing.T) {
	for _, c := range []struct{ k, n, low, high float64 }{
		{4, 20, 0.071520052479, 0.408225762517},
		{0, 10, 0, 0.217196267509},
		{0, 100, 0, 0.024745270015},
		{7, 10, 0.394181681851, 0.907305406062},
		{81, 263, 0.254521934991, 0.365647499174},
		{15, 148, 0.060448517009, 0.157643143479},
		{0, 20, 0, 0.116638982905},
		{1, 29, 0.003746173649, 0.150077686002},
		{500, 1000, 0.469047712699, 0.530952287301},
		{100, 100, 0.975254729985, 1},
	} {
		low, high := CountInterval(c.k, c.n, 0.95)
		assert.InDelta(t, c.low, low, 1e-11)
		assert.InDelta(t, c.high, high, 1e-11)
	}
	low, _ := CountInterval(3, 2, 0.95)
	assert.True(t, math.IsNaN(low))
	low, _ = CountInterval(1, 2, 1)
	assert.True(t, math.IsNaN(low))
}

func TestCountError(t *testing.T) {
	// The standard deviation of Beta(a, b) is √(ab/(a+b+1))/(a+b).
	assert.InDelta(t, math.Sqrt(0.5*200.5/202)/201, CountError(0, 200), 1e-15)
	assert.InDelta(t, CountError(0, 200), CountError(200, 200), 1e-15)
	// Many counts: the projection noise √(p(1−p)/N) (W. M. Itano et al., Phys.
	// Rev. A 47, 3554 (1993)), up to a share of about 1/N.
	assert.InEpsilon(t, math.Sqrt(0.3*0.7/1e6), CountError(3e5, 1e6), 2e-6)
	for _, c := range [][2]float64{{-1, 3}, {4, 3}, {math.NaN(), 3}, {1, math.NaN()}} {
		assert.True(t, math.IsNaN(CountError(c[0], c[1])))
	}
}

// The deviances straight from −2 ln of the ratio of likelihoods, in 300 bits
// where the terms cancel.
func TestCountingResiduals(t *testing.T) {
	for _, c := range []struct{ k, n, p float64 }{
		{30, 100, 0.3000001}, {30, 100, 0.31}, {30, 100, 0.9}, {1, 100, 0.5}, {0, 50, 0.02}, {50, 50, 0.98}, {400, 1000, 0.42}, {3, 1e6, 1e-6},
	} {
		r, slope := BinomialResidual(c.k, c.n, c.p)
		want := 2 * bigDeviance(c.k, c.n, c.p)
		assert.InEpsilon(t, want, r*r, 1e-9, "%v", c)
		assert.Equal(t, c.n*c.p > c.k, r > 0)
		h := 1e-6 * min(c.p, 1-c.p)
		up, _ := BinomialResidual(c.k, c.n, c.p+h)
		down, _ := BinomialResidual(c.k, c.n, c.p-h)
		assert.InEpsilon(t, (up-down)/(2*h), slope, 1e-7, "%v", c)
	}
	r, slope := BinomialResidual(25, 100, 0.25)
	assert.Zero(t, r)
	assert.InEpsilon(t, math.Sqrt(100/(0.25*0.75)), slope, 1e-14)
	r, _ = BinomialResidual(1, 10, 0)
	assert.True(t, math.IsInf(r, -1) || math.IsInf(r, 1))
	r, _ = BinomialResidual(0, 10, 0)
	assert.Zero(t, r)
	r, _ = BinomialResidual(0, 10, -0.1)
	assert.True(t, math.IsNaN(r))

	for _, c := range [][2]float64{{0, 3}, {7, 7.001}, {7, 9}, {1000, 1400}, {5, 0.1}} {
		r, slope := PoissonResidual(c[0], c[1])
		want := 2 * (c[1] - c[0])
		if c[0] > 0 {
			want += 2 * c[0] * math.Log(c[0]/c[1])
		}
		assert.InEpsilon(t, want, r*r, 1e-6) // the plain formula cancels at 7.001
		h := 1e-5 * c[1]
		up, _ := PoissonResidual(c[0], c[1]+h)
		down, _ := PoissonResidual(c[0], c[1]-h)
		assert.InEpsilon(t, (up-down)/(2*h), slope, 1e-7)
	}
	r, slope = PoissonResidual(9, 9)
	assert.Zero(t, r)
	assert.InEpsilon(t, 1.0/3, slope, 1e-15)
}

// bigDeviance is k ln(k/np) + (n−k) ln((n−k)/n(1−p)); the logarithms as
// artanh series, 2 Σ u^{2i+1}/(2i+1), u = (z−1)/(z+1).
func bigDeviance(k, n, p float64) float64 {
	number := func(v float64) *big.Float { return new(big.Float).SetPrec(300).SetFloat64(v) }
	term := func(a, b *big.Float) *big.Float {
		if a.Sign() == 0 {
			return number(0)
		}
		z := new(big.Float).Quo(a, b)
		u := new(big.Float).Quo(new(big.Float).Sub(z, number(1)), new(big.Float).Add(z, number(1)))
		square, power, sum := new(big.Float).Mul(u, u), u, number(0)
		for i := 1; i < 8000; i += 2 {
			sum = new(big.Float).Add(sum, new(big.Float).Quo(power, number(float64(i))))
			power = new(big.Float).Mul(power, square)
		}
		return sum.Mul(sum, number(2)).Mul(sum, a)
	}
	light := new(big.Float).Mul(number(n), number(p))
	dark := new(big.Float).Sub(number(n), light)
	d, _ := new(big.Float).Add(term(number(k), light), term(number(n-k), dark)).Float64()
	return d
}

// Least squares of these residuals is maximum likelihood: for one common
// probability the answer is Σk/Σn, with the error √(p(1−p)/Σn) up to a share
// of the order of the scatter.
func TestBinomialFitIsMaximumLikelihood(t *testing.T) {
	k := []float64{0, 3, 1, 2, 0, 4}
	n := []float64{20, 20, 15, 30, 10, 25}
	model := func(x, r, jac []float64) error {
		for i := range k {
			value, slope := BinomialResidual(k[i], n[i], x[0])
			r[i] = value
			if jac != nil {
				jac[i] = slope
			}
		}
		return nil
	}
	res, err := LeastSquares(model, len(k), []float64{0.5}, &Settings{Lower: []float64{0}, Upper: []float64{1}, ErrorsKnown: true})
	if assert.NoError(t, err) {
		assert.InDelta(t, 10.0/120, res.Params[0], 1e-11)
		assert.InEpsilon(t, math.Sqrt(110.0/120/120*10/120), res.StandardErrors()[0], 0.1)
	}
}
