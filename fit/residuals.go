package fit

import (
	"math"

	"gonum.org/v1/gonum/stat/combin"
	"gonum.org/v1/gonum/stat/distuv"
)

// ChiSquareProbability is the probability that true models with known errors
// leave a sum of squares of chiSquare or more at this number of degrees of
// freedom: Q(dof/2, χ²/2). Near 0: the model or the errors are wrong; near 1:
// the errors are too large. NaN without degrees of freedom.
func ChiSquareProbability(chiSquare float64, dof int) float64 {
	if dof <= 0 || math.IsNaN(chiSquare) {
		return math.NaN()
	}
	return distuv.ChiSquared{K: float64(dof)}.Survival(max(chiSquare, 0))
}

// Runs is the outcome of a runs test on signs.
type Runs struct {
	// Runs is the number of stretches of one sign; Positive and Negative count
	// the residuals. Zeros are left out.
	Runs, Positive, Negative int
	// Expected and Deviation are mean and standard deviation of the number of
	// runs when every order of the signs is equally likely.
	Expected, Deviation float64
	// TooFew is the probability of that many runs or fewer, TooMany of that
	// many or more. A wave that is left over makes few runs.
	TooFew, TooMany float64
	// Exact tells that the probabilities are counted, not taken from a normal
	// distribution with the same mean and deviation.
	Exact bool
}

// exactRuns is the number of residuals up to which runs are counted exactly.
const exactRuns = 200

// RunsTest counts runs of equal signs in residuals, in the order given, and
// compares with chance (A. Wald, J. Wolfowitz, Ann. Math. Stat. 11, 147
// (1940)).
func RunsTest(residuals []float64) Runs {
	var t Runs
	last := 0.0
	for _, r := range residuals {
		if r == 0 || math.IsNaN(r) {
			continue
		}
		if r > 0 {
			t.Positive++
		} else {
			t.Negative++
		}
		if last == 0 || (r > 0) != (last > 0) {
			t.Runs++
		}
		last = r
	}
	a, b := float64(t.Positive), float64(t.Negative)
	n := a + b
	t.TooFew, t.TooMany = 1, 1
	if t.Positive == 0 || t.Negative == 0 {
		t.Expected, t.Exact = min(n, 1), true
		return t
	}
	t.Expected = 1 + 2*a*b/n
	t.Deviation = math.Sqrt(2 * a * b * (2*a*b - n) / (n * n * (n - 1)))
	if t.Positive+t.Negative > exactRuns {
		// Half a run for the step between whole numbers.
		normal := distuv.UnitNormal
		t.TooFew = normal.CDF((float64(t.Runs) + 0.5 - t.Expected) / t.Deviation)
		t.TooMany = normal.Survival((float64(t.Runs) - 0.5 - t.Expected) / t.Deviation)
		return t
	}
	t.Exact = true
	t.TooFew, t.TooMany = 0, 0
	for runs := 2; runs <= t.Positive+t.Negative; runs++ {
		p := runsProbability(runs, t.Positive, t.Negative)
		if runs <= t.Runs {
			t.TooFew += p
		}
		if runs >= t.Runs {
			t.TooMany += p
		}
	}
	t.TooFew, t.TooMany = min(t.TooFew, 1), min(t.TooMany, 1)
	return t
}

// TwoSided is the probability of a number of runs at least this unlikely on
// either side.
func (t Runs) TwoSided() float64 { return min(1, 2*min(t.TooFew, t.TooMany)) }

// runsProbability is the chance of that many runs: C(a−1, k−1) ways to cut a
// positive residuals into k stretches, and likewise for the b negative ones.
func runsProbability(runs, a, b int) float64 {
	total := logBinomial(a+b, a)
	cut := func(k, l int) float64 {
		if k < 1 || l < 1 || k > a || l > b {
			return 0
		}
		return math.Exp(logBinomial(a-1, k-1) + logBinomial(b-1, l-1) - total)
	}
	half := runs / 2
	if runs%2 == 0 {
		return 2 * cut(half, half)
	}
	return cut(half+1, half) + cut(half, half+1)
}

func logBinomial(n, k int) float64 {
	return combin.LogGeneralizedBinomial(float64(n), float64(k))
}

// Autocorrelation is the correlation of each value with the next,
// Σ(yᵢ−ȳ)(yᵢ₊₁−ȳ)/Σ(yᵢ−ȳ)²: for n independent values about −1/n, with a
// standard deviation of about 1/√n. NaN for fewer than two values or equal
// ones.
func Autocorrelation(y []float64) float64 {
	mean := 0.0
	for i, v := range y {
		mean += (v - mean) / float64(i+1)
	}
	above, below, last := 0.0, 0.0, 0.0
	for i, v := range y {
		v -= mean
		if i > 0 {
			above += last * v
		}
		below += v * v
		last = v
	}
	if below == 0 {
		return math.NaN()
	}
	return above / below
}

// Scatter estimates the standard deviation of one value of y about a smooth
// curve that is not known, from how far each point lies off the straight line
// through its neighbours (T. Gasser, L. Sroka, C. Jennen-Steinmetz, Biometrika
// 73, 625 (1986)). x is sorted; where it has equal values, the mean of the
// neighbours serves. Curvature over three points makes it larger. NaN for
// fewer than three points.
func Scatter(x, y []float64) float64 {
	if len(x) != len(y) {
		panic("fit: Scatter: lengths of x and y differ")
	}
	if len(x) < 3 {
		return math.NaN()
	}
	sum := 0.0
	for i := 1; i < len(x)-1; i++ {
		a := 0.5
		if width := x[i+1] - x[i-1]; width > 0 {
			a = (x[i+1] - x[i]) / width
		}
		b := 1 - a
		off := a*y[i-1] + b*y[i+1] - y[i]
		sum += off * off / (a*a + b*b + 1)
	}
	return math.Sqrt(sum / float64(len(x)-2))
}
