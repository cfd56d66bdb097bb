package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// The power at each frequency against a general linear least-squares fit of
// offset, cosine and sine, at uneven points with uneven errors.
func TestPeriodogramAgainstLeastSquares(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	var x, y, sigma []float64
	for range 40 {
		x = append(x, 100+10*rng.Float64())
		y = append(y, 3+rng.NormFloat64())
		sigma = append(sigma, 0.5+rng.Float64())
	}
	constant := Curve{X: x, Y: y, Sigma: sigma, F: func(x float64, p []float64) float64 { return p[0] }}
	flat, err := constant.Fit([]float64{1}, nil)
	require.NoError(t, err)
	frequencies := []float64{0.07, 0.31, 1.9, 7.7}
	for k, power := range Periodogram(x, y, sigma, frequencies) {
		w := 2 * math.Pi * frequencies[k]
		sine := Curve{X: x, Y: y, Sigma: sigma, F: func(x float64, p []float64) float64 {
			return p[0] + p[1]*math.Cos(w*(x-105)) + p[2]*math.Sin(w*(x-105))
		}}
		res, err := sine.Fit([]float64{1, 1, 1}, nil)
		require.NoError(t, err)
		assert.InDelta(t, 1-res.ChiSquare/flat.ChiSquare, power, 1e-9)
	}
}

func TestPeaks(t *testing.T) {
	sine := func(x []float64, f float64) []float64 {
		var y []float64
		for _, x := range x {
			y = append(y, 0.5+0.3*math.Cos(2*math.Pi*f*x+0.7))
		}
		return y
	}
	var even, jittered, grid, late, rounded, bursts []float64
	rng := rand.New(rand.NewPCG(9, 1))
	for i := range 101 {
		even = append(even, float64(i)*0.1)
		jittered = append(jittered, float64(i)*0.1+0.1*rng.Float64())
		late = append(late, 1e4+float64(i)*0.1)
		rounded = append(rounded, math.Round(float64(i)*79.7)/797)
		bursts = append(bursts, float64(i/10)*1.09+float64(i%10)*0.005)
		if i%3 != 1 && (i < 40 || i > 60) {
			grid = append(grid, float64(i)*0.1)
		}
	}
	for _, c := range []struct {
		name string
		x    []float64
		f    float64
	}{
		{"even", even, 1.2345}, {"gaps on a grid", grid, 4.321}, {"far from zero", late, 0.777},
		{"just below Nyquist", even, 4.93}, {"under one cycle", even, 0.07},
		{"times rounded to an eightieth of the step", rounded, 2.94},
		{"bursts", bursts, 69.2},
		{"beyond the mean Nyquist frequency of 5", jittered, 21.7},
	} {
		found := Peaks(c.x, sine(c.x, c.f), nil, 3)
		require.NotEmpty(t, found, c.name)
		p := found[0]
		assert.InDelta(t, c.f, p.Frequency, 1e-6, c.name) // golden sections end at the root of rounding
		assert.InDelta(t, 1, p.Power, 1e-9, c.name)
		assert.Less(t, p.FalseAlarm, 1e-10, c.name)
		assert.InDelta(t, 0.3, p.Amplitude, 1e-5, c.name)
		assert.InDelta(t, 0.5, p.Offset, 1e-5, c.name)
		assert.InDelta(t, 0, math.Remainder(p.Phase-0.7, 2*math.Pi), 2*math.Pi*1e-6*(c.x[0]+10), c.name)
	}
	// Even sampling cannot tell 8.5 from 1.5, and only the lower is searched.
	assert.InDelta(t, 1.5, Peaks(even, sine(even, 8.5), nil, 1)[0].Frequency, 1e-6)
}

func TestPeaksOfHostileData(t *testing.T) {
	nan := math.NaN()
	assert.Empty(t, Peaks(nil, nil, nil, 3))
	assert.Empty(t, Peaks([]float64{1, 2, 3}, []float64{1, 2, 1}, nil, 3))
	assert.Empty(t, Peaks([]float64{1, 1, 1, 1, 1}, []float64{1, 2, 1, 2, 1}, nil, 3))
	assert.Empty(t, Peaks([]float64{1, 2, 3, 4, 5}, []float64{0.1, 0.1, 0.1, 0.1, 0.1}, nil, 3))
	assert.Empty(t, Peaks([]float64{1, 2, 3, 4, nan}, []float64{0, 1, nan, 1, 0}, nil, 3))
	for _, p := range Peaks([]float64{5, 1, 3, 3, 2, 4, math.Inf(1)}, []float64{0, 1, 0, 1, 0, 1, 2}, nil, 3) {
		assert.False(t, math.IsNaN(p.Frequency+p.Power+p.Amplitude+p.Phase+p.Offset+p.FalseAlarm))
	}
	// A million points, averaged in groups.
	x, y := make([]float64, 1_000_000), make([]float64, 1_000_000)
	for i := range x {
		x[i] = float64(i) * 1e-6
		y[i] = math.Sin(2 * math.Pi * 123.4 * x[i])
	}
	assert.InDelta(t, 123.4, Peaks(x, y, nil, 1)[0].Frequency, 1e-3)
}

// Of 2000 traces of noise, 5 % show a peak that chance makes in 5 %, within
// three standard errors of that count, and some more for the theory's being an
// upper bound that is close for rare peaks.
func TestFalseAlarms(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 2))
	alarms := 0
	for range 2000 {
		var x, y []float64
		for i := range 60 {
			x = append(x, float64(i))
			y = append(y, rng.NormFloat64())
		}
		if Peaks(x, y, nil, 1)[0].FalseAlarm < 0.05 {
			alarms++
		}
	}
	assert.GreaterOrEqual(t, alarms, 60)
	assert.LessOrEqual(t, alarms, 130)
}

// The frequency of a sine in noise scatters as its Cramér–Rao bound says:
// var(ω) ≥ 24σ²/(A²N(N²−1)) (D. C. Rife, R. R. Boorstyn, IEEE Trans. Inf.
// Theory 20, 591 (1974)); the exact inverse of the information at ω = 0.7,
// φ = 0.3, N = 100, A = 1, σ = 0.1 is 2.46497469e-7. Over 300 traces the
// variance is within 3√(2/300) = 24 % of it.
func TestFrequencyReachesTheBound(t *testing.T) {
	rng := rand.New(rand.NewPCG(13, 2))
	x, y := make([]float64, 100), make([]float64, 100)
	variance := 0.0
	for range 300 {
		for i := range x {
			x[i] = float64(i)
			y[i] = math.Sin(0.7*x[i]+0.3) + 0.1*rng.NormFloat64()
		}
		off := 2*math.Pi*Peaks(x, y, nil, 1)[0].Frequency - 0.7
		variance += off * off / 300
	}
	assert.InEpsilon(t, 2.46497469e-7, variance, 0.24)
}

func BenchmarkPeaks(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 2))
	x, y := make([]float64, 200), make([]float64, 200)
	for i := range x {
		x[i], y[i] = float64(i)+rng.Float64(), rng.NormFloat64()
	}
	for b.Loop() {
		Peaks(x, y, nil, 5)
	}
}
