package fit

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// CountError is the standard deviation to give to the fraction bright/shots:
// that of the posterior with Jeffreys' prior, Beta(bright+½, shots−bright+½).
// For many counts it is √(p(1−p)/shots); unlike that it is not zero where no
// or every shot was bright, so such points keep a finite weight.
func CountError(bright, shots float64) float64 {
	return distuv.Beta{Alpha: bright + 0.5, Beta: shots - bright + 0.5}.StdDev()
}

// CountInterval holds the probability behind bright out of shots at the given
// level (0.95, say): the equal-tailed Jeffreys interval, open to 0 at no bright
// shot and to 1 at all bright, as L. D. Brown, T. T. Cai, A. DasGupta, Stat.
// Sci. 16, 101 (2001) recommend. NaN where not 0 ≤ bright ≤ shots or not
// 0 < level < 1.
func CountInterval(bright, shots, level float64) (low, high float64) {
	if !(bright >= 0 && bright <= shots && level > 0 && level < 1) {
		return math.NaN(), math.NaN()
	}
	beta := distuv.Beta{Alpha: bright + 0.5, Beta: shots - bright + 0.5}
	low, high = 0, 1
	if bright > 0 {
		low = beta.Quantile((1 - level) / 2)
	}
	if bright < shots {
		high = beta.Quantile((1 + level) / 2)
	}
	return low, high
}

// BinomialResidual is the signed root of the deviance of bright out of shots
// for a model with probability p, and its slope by p. The sum of its squares
// over all points is −2 ln(likelihood) up to a constant, so least squares of it
// is maximum likelihood; for many counts it is (p − bright/shots)/√(p(1−p)/shots).
// Infinite where p excludes the counts, NaN outside 0 to 1.
func BinomialResidual(bright, shots, p float64) (residual, slope float64) {
	if !(p >= 0 && p <= 1) {
		return math.NaN(), math.NaN()
	}
	if p == 0 && bright == 0 || p == 1 && bright == shots {
		// The end of the range: residual ∝ √(distance), slope without bound.
		return 0, math.Inf(1)
	}
	if p == 0 || p == 1 {
		return math.Inf(int(1 - 2*p)), math.NaN()
	}
	light, dark := shots*p, shots*(1-p)
	off := light - bright
	deviance := 2 * (light*excess(-off/light) + dark*excess(off/dark))
	return signedRoot(off, deviance, 1/(p*(1-p)), shots*p*(1-p))
}

// PoissonResidual is the signed root of the deviance of a number of counts for
// a model that expects mean of them, and its slope by mean; see
// BinomialResidual. For many counts it is (mean − counts)/√mean.
func PoissonResidual(counts, mean float64) (residual, slope float64) {
	if !(mean >= 0) {
		return math.NaN(), math.NaN()
	}
	if mean == 0 {
		if counts == 0 {
			return 0, math.Inf(1)
		}
		return math.Inf(-1), math.NaN()
	}
	off := mean - counts
	return signedRoot(off, 2*mean*excess(-off/mean), 1/mean, mean)
}

// signedRoot is ±√deviance with the sign of off, and its slope, for a deviance
// whose slope is 2·off·steepness and which is off²/variance where off is small.
func signedRoot(off, deviance, steepness, variance float64) (residual, slope float64) {
	root := math.Sqrt(max(deviance, 0))
	if root == 0 {
		return 0, steepness * math.Sqrt(variance)
	}
	return math.Copysign(root, off), steepness * math.Abs(off) / root
}

// excess is (1+u) ln(1+u) − u, at least 0; for small u by its series
// Σ (−u)^k/(k(k−1)), k ≥ 2, since the difference cancels.
func excess(u float64) float64 {
	if u <= -1 {
		return 1
	}
	if math.Abs(u) > 0.05 {
		return (1+u)*math.Log1p(u) - u
	}
	sum, power := 0.0, u*u
	for k := 2.0; k < 16; k++ {
		sum += power / (k * (k - 1))
		power *= -u
	}
	return sum
}
