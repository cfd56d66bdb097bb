package fit

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Problems with published minima: J. J. Moré, B. S. Garbow, K. E. Hillstrom,
// ACM Trans. Math. Softw. 7, 17 (1981), with the starts and sums of squares
// given there (six digits).
func TestPublishedMinima(t *testing.T) {
	bard := []float64{.14, .18, .22, .25, .29, .32, .35, .39, .37, .58, .73, .96, 1.34, 2.10, 4.39}
	meyer := []float64{34780, 28610, 23650, 19630, 16370, 13720, 11540, 9744, 8261, 7030, 6005, 5147, 4427, 3820, 3307, 2872}
	for _, p := range []struct {
		name    string
		size    int
		start   []float64
		f       func(x, r []float64)
		minimum float64
	}{
		{"Rosenbrock", 2, []float64{-1.2, 1}, func(x, r []float64) {
			r[0], r[1] = 10*(x[1]-x[0]*x[0]), 1-x[0]
		}, 0},
		{"Powell singular", 4, []float64{3, -1, 0, 1}, func(x, r []float64) {
			r[0], r[1] = x[0]+10*x[1], math.Sqrt(5)*(x[2]-x[3])
			r[2], r[3] = (x[1]-2*x[2])*(x[1]-2*x[2]), math.Sqrt(10)*(x[0]-x[3])*(x[0]-x[3])
		}, 0},
		{"Beale", 3, []float64{1, 1}, func(x, r []float64) {
			for i, y := range []float64{1.5, 2.25, 2.625} {
				r[i] = y - x[0]*(1-math.Pow(x[1], float64(i+1)))
			}
		}, 0},
		{"Jennrich and Sampson", 10, []float64{0.3, 0.4}, func(x, r []float64) {
			for i := range r {
				k := float64(i + 1)
				r[i] = 2 + 2*k - math.Exp(k*x[0]) - math.Exp(k*x[1])
			}
		}, 124.362},
		{"Bard", 15, []float64{1, 1, 1}, func(x, r []float64) {
			for i, y := range bard {
				u, v := float64(i+1), float64(15-i)
				r[i] = y - (x[0] + u/(v*x[1]+min(u, v)*x[2]))
			}
		}, 8.21487e-3},
		{"Brown and Dennis", 20, []float64{25, 5, -5, -1}, func(x, r []float64) {
			for i := range r {
				s := float64(i+1) / 5
				a, b := x[0]+s*x[1]-math.Exp(s), x[2]+x[3]*math.Sin(s)-math.Cos(s)
				r[i] = a*a + b*b
			}
		}, 85822.2},
		{"Meyer", 16, []float64{0.02, 4000, 250}, func(x, r []float64) {
			for i, y := range meyer {
				r[i] = x[0]*math.Exp(x[1]/(45+5*float64(i+1)+x[2])) - y
			}
		}, 87.9458},
	} {
		res, err := LeastSquares(Differences(func(x, r []float64) error { p.f(x, r); return nil }), p.size, p.start, nil)
		require.NoError(t, err, p.name)
		assert.True(t, res.Status.Converged(), "%s: %v", p.name, res.Status)
		if p.minimum == 0 {
			// Powell's minimum is flat: its residuals fall with the square.
			assert.Less(t, res.ChiSquare, 1e-20, p.name)
			continue
		}
		assert.InEpsilon(t, p.minimum, res.ChiSquare, 6e-6, p.name)
	}
}

// Random linear problems in boxes: the answer is the best of all 3ⁿ ways to
// hold parameters low, high or not at all.
func TestBoundsAgainstEnumeration(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	const n, m = 4, 7
	for trial := range 200 {
		a, y := make([]float64, m*n), make([]float64, m)
		for i := range a {
			a[i] = rng.NormFloat64()
		}
		for i := range y {
			y[i] = 3 * rng.NormFloat64()
		}
		model := func(x, r, jac []float64) error {
			for i := range y {
				r[i] = -y[i]
				for j, v := range x {
					r[i] += a[i*n+j] * v
				}
			}
			copy(jac, a)
			return nil
		}
		lower, upper := make([]float64, n), make([]float64, n)
		start := make([]float64, n)
		for j := range n {
			lower[j], upper[j] = -rng.Float64(), rng.Float64()
			start[j] = lower[j] + (upper[j]-lower[j])*rng.Float64()
		}
		res, err := LeastSquares(model, m, start, &Settings{Lower: lower, Upper: upper})
		require.NoError(t, err)
		require.True(t, res.Status.Converged(), "trial %d: %v", trial, res.Status)

		best := math.Inf(1)
		for code := range 81 {
			fixed, x := make([]bool, n), make([]float64, n)
			for j, c := 0, code; j < n; j, c = j+1, c/3 {
				switch c % 3 {
				case 1:
					fixed[j], x[j] = true, lower[j]
				case 2:
					fixed[j], x[j] = true, upper[j]
				}
			}
			at := make([]float64, m)
			require.NoError(t, model(x, at, nil))
			l := linearized{n: n, rows: m, j: a, r: at, scale: []float64{1, 1, 1, 1}}
			l.factor(fixed)
			l.solve(l.project(at), 0, x)
			inside := true
			for j, v := range x {
				inside = inside && v >= lower[j] && v <= upper[j]
			}
			if inside {
				require.NoError(t, model(x, at, nil))
				best = min(best, sumOfSquares(at))
			}
		}
		require.InEpsilon(t, best, res.ChiSquare, 1e-12, "trial %d", trial)
	}
}

// Rosenbrock's function with x₂ ≥ 1.5: problem 2 of W. Hock, K. Schittkowski,
// Test Examples for Nonlinear Programming Codes (Springer, 1981), whose exact
// answer is x₁ = 2a cos(⅓ arccos(1/b)), a = √(598/1200), b = 400a³.
func TestBoundOnACurvedValley(t *testing.T) {
	model := func(x, r, jac []float64) error {
		r[0], r[1] = 10*(x[1]-x[0]*x[0]), 1-x[0]
		copy(jac, []float64{-20 * x[0], 10, -1, 0})
		return nil
	}
	a := math.Sqrt(598.0 / 1200)
	x1 := 2 * a * math.Cos(math.Acos(1/(400*a*a*a))/3)
	res, err := LeastSquares(model, 2, []float64{3, 4}, &Settings{Lower: []float64{math.Inf(-1), 1.5}, ErrorsKnown: true})
	require.NoError(t, err)
	assert.InDelta(t, x1, res.Params[0], 1e-9)
	assert.Equal(t, 1.5, res.Params[1])
	assert.InDelta(t, 0.0504261879, res.ChiSquare, 1e-10)
	assert.Equal(t, []int{1}, res.AtBound)
	assert.Equal(t, 1, res.DegreesOfFreedom)
	se := res.StandardErrors()
	assert.True(t, math.IsNaN(se[1]))
	assert.InDelta(t, 1/math.Sqrt(400*x1*x1+1), se[0], 1e-9) // the column alone
	// A bound that the answer does not touch changes nothing.
	res, err = LeastSquares(model, 2, []float64{-1.2, 1}, &Settings{Lower: []float64{-5, -1.5}})
	require.NoError(t, err)
	assert.InDelta(t, 1, res.Params[0], 1e-9)
	assert.Empty(t, res.AtBound)
}

func TestHeldAndMovedStarts(t *testing.T) {
	model := func(x, r, jac []float64) error {
		for i := range r {
			r[i] = x[0] + x[1]*float64(i) - []float64{1, 3, 5, 7}[i]
			if jac != nil {
				jac[2*i], jac[2*i+1] = 1, float64(i)
			}
		}
		return nil
	}
	res, err := LeastSquares(model, 4, []float64{9, 2}, &Settings{Lower: []float64{0, 2}, Upper: []float64{3, 2}})
	require.NoError(t, err)
	assert.Equal(t, []int{1}, res.Held)
	assert.InDelta(t, 1, res.Params[0], 1e-14)
	assert.Equal(t, 3, res.DegreesOfFreedom)
	res, err = LeastSquares(model, 4, []float64{1, 2}, nil)
	require.NoError(t, err)
	assert.Equal(t, ExactFit, res.Status)
}

// The model may have no value in places: the search goes round them.
func TestRegionsWithoutValue(t *testing.T) {
	model := Differences(func(x, r []float64) error {
		for i := range r {
			u := float64(i + 1)
			r[i] = math.Sqrt(x[0]*u) - math.Sqrt(2*u)/1 + math.Log(x[1])
		}
		return nil
	})
	res, err := LeastSquares(model, 5, []float64{30, 0.01}, nil)
	require.NoError(t, err)
	assert.InDelta(t, 2, res.Params[0], 1e-8)
	assert.InDelta(t, 1, res.Params[1], 1e-8)

	_, err = LeastSquares(model, 5, []float64{-1, 1}, nil)
	assert.ErrorContains(t, err, "at the start ([-1 1]) residual 0 is NaN")
}

func TestBadInput(t *testing.T) {
	fine := func(x, r, jac []float64) error { copy(r, x); return nil }
	nan, inf := math.NaN(), math.Inf(1)
	for text, call := range map[string]func() error{
		"no residuals":                   func() error { _, err := LeastSquares(fine, 0, []float64{1}, nil); return err },
		"start of parameter 0 is NaN":    func() error { _, err := LeastSquares(fine, 1, []float64{nan}, nil); return err },
		"start of parameter 0 is +Inf":   func() error { _, err := LeastSquares(fine, 1, []float64{inf}, nil); return err },
		"2 lower bounds for 1":           func() error { return settingsError(&Settings{Lower: []float64{1, 2}}) },
		"2 upper bounds for 1":           func() error { return settingsError(&Settings{Upper: []float64{1, 2}}) },
		"lower bound 2 and the":          func() error { return settingsError(&Settings{Lower: []float64{2}, Upper: []float64{1}}) },
		"lower bound NaN and the":        func() error { return settingsError(&Settings{Lower: []float64{nan}}) },
		"Tolerance is -1":                func() error { return settingsError(&Settings{Tolerance: -1}) },
		"SlopeError is NaN":              func() error { return settingsError(&Settings{SlopeError: nan}) },
		"Iterations is -1":               func() error { return settingsError(&Settings{Iterations: -1}) },
		"2 values of x and 1 of y":       func() error { _, err := Curve{X: []float64{1, 2}, Y: []float64{1}}.Model(); return err },
		"no function F":                  func() error { _, err := Curve{X: []float64{1}, Y: []float64{1}}.Model(); return err },
		"1 standard deviations for 2":    func() error { return curveError([]float64{1, 2}, []float64{1}) },
		"standard deviation 0; it must":  func() error { return curveError([]float64{1}, []float64{0}) },
		"point 0 is (NaN, NaN); leave o": func() error { return curveError([]float64{nan}, nil) },
	} {
		assert.ErrorContains(t, call(), text)
	}
	stop := errors.New("stopped")
	calls := 0
	_, err := LeastSquares(func(x, r, jac []float64) error {
		r[0] = x[0]*x[0] + 1
		if jac != nil {
			jac[0] = 2 * x[0]
		}
		if calls++; calls == 3 {
			return stop
		}
		return nil
	}, 1, []float64{3}, nil)
	assert.ErrorIs(t, err, stop)
}

func settingsError(s *Settings) error {
	_, err := LeastSquares(func(x, r, jac []float64) error { return nil }, 1, []float64{1}, s)
	return err
}

func curveError(y, sigma []float64) error {
	_, err := Curve{X: y, Y: y, Sigma: sigma, F: func(x float64, p []float64) float64 { return 0 }}.Model()
	return err
}

// Wrong slopes and jumps end in words, not in a loop.
func TestSlopesThatLie(t *testing.T) {
	res, err := LeastSquares(func(x, r, jac []float64) error {
		r[0], r[1] = x[0]-1, 2
		if jac != nil {
			jac[0], jac[1] = -1, 0 // the wrong sign
		}
		return nil
	}, 2, []float64{5}, nil)
	require.NoError(t, err)
	assert.Equal(t, Stalled, res.Status)
	assert.Contains(t, res.Status.String(), "not converged")
	assert.Equal(t, 25, res.Searches)

	res, err = LeastSquares(func(x, r, jac []float64) error {
		r[0], r[1] = 10*(x[1]-x[0]*x[0]), 1-x[0]
		copy(jac, []float64{-20 * x[0], 10, -1, 0})
		return nil
	}, 2, []float64{-1.2, 1}, &Settings{Iterations: 3, Restarts: -1})
	require.NoError(t, err)
	assert.Equal(t, IterationLimit, res.Status)
	assert.Equal(t, 3, res.Iterations)
}

// A first step that trusts the slopes too far ends on a plateau where the rate
// is so large that it changes nothing; the restarts find the way back.
func TestRestartsLeaveAPlateau(t *testing.T) {
	p := readSTRD(t, "BoxBOD")
	c := Curve{X: p.x, Y: p.y, F: func(x float64, b []float64) float64 { return saturating(x, b, nil) }}
	lost, err := c.Fit(p.starts[0], &Settings{Reach: 100, Restarts: -1})
	require.NoError(t, err)
	assert.Greater(t, lost.ChiSquare, 2*p.rss)
	found, err := c.Fit(p.starts[0], &Settings{Reach: 100})
	require.NoError(t, err)
	assert.Greater(t, found.Searches, 1)
	assert.InEpsilon(t, p.rss, found.ChiSquare, 1e-9)
}

func TestSameBitsTwice(t *testing.T) {
	p := readSTRD(t, "MGH17")
	c := Curve{X: p.x, Y: p.y, F: func(x float64, b []float64) float64 { return strdModels["MGH17"](x, b, nil) }}
	first, err := c.Fit(p.starts[0], nil)
	require.NoError(t, err)
	second, err := c.Fit(p.starts[0], nil)
	require.NoError(t, err)
	assert.Equal(t, first.Params, second.Params)
	assert.Equal(t, first.Covariance, second.Covariance)
}

func BenchmarkLeastSquares(b *testing.B) {
	p := readSTRD(b, "ENSO")
	f := strdModels["ENSO"]
	c := Curve{X: p.x, Y: p.y, F: func(x float64, b []float64) float64 { return f(x, b, nil) }, Slopes: func(x float64, b, g []float64) { f(x, b, g) }}
	for b.Loop() {
		_, _ = c.Fit(p.starts[0], nil)
	}
}
