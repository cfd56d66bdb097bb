package fit

import (
	"cmp"
	"math"
	"slices"
)

// A Peak is a frequency at which a sine fits data better than a constant.
type Peak struct {
	Frequency float64 // in cycles per unit of x
	// Power is the share of the weighted sum of squares about the mean that
	// the sine takes away, 0 to 1.
	Power float64
	// FalseAlarm is the probability that noise alone shows such a peak
	// somewhere in the range that was searched.
	FalseAlarm float64
	// The sine is Offset + Amplitude cos(2π Frequency x + Phase).
	Offset, Amplitude, Phase float64
}

// Periodogram is the power of y at x for each frequency, by least squares with
// a free offset and weights 1/sigma² (sigma nil: equal ones): N. R. Lomb,
// Astrophys. Space Sci. 39, 447 (1976); J. D. Scargle, Astrophys. J. 263, 835
// (1982); with the offset, M. Zechmeister, M. Kürster, Astron. Astrophys. 496,
// 577 (2009). The points may stand anywhere and in any order.
func Periodogram(x, y, sigma, frequencies []float64) []float64 {
	d := newSineData(x, y, sigma)
	power := make([]float64, len(frequencies))
	for k, f := range frequencies {
		power[k] = d.peak(f).Power
	}
	return power
}

// Peaks returns the highest peaks of the periodogram, at most count, highest
// first, refined between the frequencies of the grid. The range ends where
// sampling makes higher frequencies look like lower ones: at half the inverse
// of the step that all x are multiples of, or, where there is none, at ten
// times the mean sampling's Nyquist frequency (uneven sampling has no such
// limit of its own; L. Eyer, P. Bartholdi, Astron. Astrophys. Suppl. 135, 1
// (1999)). It begins at half a cycle over the window.
//
// Long data are averaged in groups of neighbours before; then frequencies of
// more than a thousand cycles over the window are not seen. No peaks come from
// fewer than four different x, or from a constant y.
func Peaks(x, y, sigma []float64, count int) []Peak {
	all := len(x)
	x, y, sigma = condense(x, y, sigma, 4000)
	if len(x) < 4 {
		return nil
	}
	d := newSineData(x, y, sigma)
	grid := frequencyGrid(x, len(x) < all)
	if len(grid) == 0 || !(d.total > 0) {
		return nil
	}
	power := d.sweep(grid)
	var found []Peak
	for k := range grid {
		if (k > 0 && power[k-1] > power[k]) || (k < len(grid)-1 && power[k+1] >= power[k]) {
			continue
		}
		found = append(found, Peak{Frequency: grid[k], Power: power[k]})
	}
	slices.SortStableFunc(found, func(a, b Peak) int { return cmp.Compare(b.Power, a.Power) })
	found = found[:min(count, len(found))]
	for i := range found {
		found[i] = d.refine(found[i].Frequency, grid)
		found[i].FalseAlarm = d.falseAlarm(found[i].Power, grid[len(grid)-1])
	}
	slices.SortStableFunc(found, func(a, b Peak) int { return cmp.Compare(b.Power, a.Power) })
	return found
}

// gridPerCycle is the number of frequencies for each further cycle over the
// window: between two of them a peak loses at most a few hundredths.
const gridPerCycle = 6

// frequencyGrid for sorted x; averaged groups are trusted up to half the Nyquist
// frequency of their mean distance.
func frequencyGrid(x []float64, averaged bool) []float64 {
	window := x[len(x)-1] - x[0]
	if !(window > 0) || math.IsInf(window, 0) {
		return nil
	}
	nyquist := float64(len(x)-1) / (2 * window)
	top := nyquist / 2
	if !averaged {
		if step := commonStep(x); step > 0 {
			top = 1 / (2 * step)
		} else {
			top = max(10*nyquist, 1/(2*medianGap(x)))
		}
	}
	// At most 10⁸ sines, some tenths of a second.
	points := int(min(top*window*gridPerCycle+1e-6, float64(100_000_000/len(x))))
	var grid []float64
	for k := gridPerCycle / 2; k <= points; k++ {
		grid = append(grid, float64(k)/(gridPerCycle*window))
	}
	return grid
}

// medianGap is the median of the distances of sorted x that are not zero.
func medianGap(x []float64) float64 {
	var gaps []float64
	for i := 1; i < len(x); i++ {
		if x[i] > x[i-1] {
			gaps = append(gaps, x[i]-x[i-1])
		}
	}
	slices.Sort(gaps)
	return gaps[len(gaps)/2]
}

// commonStep is the step that all distances of sorted x are multiples of,
// within three hundredths of it, or 0.
func commonStep(x []float64) float64 {
	smallest := math.Inf(1)
	for i := 1; i < len(x); i++ {
		if gap := x[i] - x[i-1]; gap > 1e-9*(x[len(x)-1]-x[0]) {
			smallest = min(smallest, gap)
		}
	}
	// The smallest gap may itself be a few steps (points at 0, 2, 5).
	for parts := 1.0; parts <= 4; parts++ {
		step, fits := smallest/parts, true
		for i := 1; i < len(x) && fits; i++ {
			n := (x[i] - x[i-1]) / step
			fits = math.Abs(n-math.Round(n)) <= 0.03
		}
		if fits {
			return step
		}
	}
	return 0
}

// sineData holds weighted data about their mean.
type sineData struct {
	x, y, w []float64 // Σw = 1, Σwy = 0
	mean    float64
	total   float64 // Σwy²
}

func newSineData(x, y, sigma []float64) *sineData {
	if len(x) != len(y) || sigma != nil && len(sigma) != len(y) {
		panic("fit: lengths of x, y and sigma differ")
	}
	d := &sineData{x: x, y: make([]float64, len(y)), w: make([]float64, len(y))}
	largest := 0.0
	for i := range d.w {
		d.w[i] = 1
		if sigma != nil {
			d.w[i] = 1 / (sigma[i] * sigma[i])
		}
		largest += d.w[i]
	}
	size := 0.0
	for i := range d.w {
		d.w[i] /= largest
		d.mean += d.w[i] * y[i]
		size = max(size, math.Abs(y[i]))
	}
	for i := range y {
		d.y[i] = y[i] - d.mean
		d.total += d.w[i] * d.y[i] * d.y[i]
	}
	if d.total <= 1e-28*size*size {
		d.total = 0 // a constant but for rounding
	}
	return d
}

// peak fits the sine of frequency f: 3×3 normal equations with the offset
// taken out.
func (d *sineData) peak(f float64) Peak {
	var c, s, cc, cs, yc, ys float64
	for i, x := range d.x {
		sin, cos := math.Sincos(2 * math.Pi * f * (x - d.x[0]))
		w := d.w[i]
		c += w * cos
		s += w * sin
		cc += w * cos * cos
		cs += w * cos * sin
		yc += w * d.y[i] * cos
		ys += w * d.y[i] * sin
	}
	a, b, power := d.solve(c, s, cc, cs, yc, ys)
	p := Peak{Frequency: f, Power: power, Offset: d.mean - a*c - b*s, Amplitude: math.Hypot(a, b)}
	// a cos θ + b sin θ = A cos(θ − atan2(b, a)), θ counted from the first x.
	p.Phase = math.Remainder(-math.Atan2(b, a)-2*math.Pi*f*d.x[0], 2*math.Pi)
	return p
}

// falseAlarm is the probability that white noise has a peak of this power below
// the frequency top: R. V. Baluev, Mon. Not. R. Astron. Soc. 385, 1279 (2008),
// equations 5 and 6 with table 1, a sine with free offset against a constant.
func (d *sineData) falseAlarm(power, top float64) float64 {
	n := float64(len(d.x))
	mean, square := 0.0, 0.0
	for i, x := range d.x {
		mean += d.w[i] * (x - d.x[0])
		square += d.w[i] * (x - d.x[0]) * (x - d.x[0])
	}
	a, _ := math.Lgamma((n - 1) / 2)
	b, _ := math.Lgamma((n - 2) / 2)
	crossings := math.Sqrt(2/(n-1)) * math.Exp(a-b) * // of order 1
		top * math.Sqrt(4*math.Pi*max(square-mean*mean, 0)) *
		math.Pow(1-power, (n-4)/2) * math.Sqrt((n-1)*power/2)
	single := math.Pow(1-power, (n-3)/2)
	// 1 − (1 − single) e^{−crossings}, also where it is tiny.
	return single - (1-single)*math.Expm1(-crossings)
}

func (d *sineData) solve(c, s, cc, cs, yc, ys float64) (a, b, power float64) {
	ss := 1 - cc - s*s
	cc -= c * c
	cs -= c * s
	if d.total == 0 {
		return 0, 0, 0
	}
	det := cc*ss - cs*cs
	if det <= 1e-10*(cc+ss)*(cc+ss) {
		// One of the two alone: at the Nyquist frequency, or with all x at a
		// few phases. Its direction is that of the larger eigenvalue.
		angle := 0.5 * math.Atan2(2*cs, cc-ss)
		sin, cos := math.Sincos(angle)
		length := cc*cos*cos + 2*cs*sin*cos + ss*sin*sin
		if length <= 1e-10 {
			return 0, 0, 0
		}
		along := (yc*cos + ys*sin) / length
		return along * cos, along * sin, min(along*along*length/d.total, 1)
	}
	a, b = (yc*ss-ys*cs)/det, (ys*cc-yc*cs)/det
	return a, b, min(max((a*yc+b*ys)/d.total, 0), 1)
}

// sweep is the power on an even grid. The phases advance by multiplication, set
// right now and then.
func (d *sineData) sweep(grid []float64) []float64 {
	power := make([]float64, len(grid))
	if len(grid) < 2 {
		for k, f := range grid {
			power[k] = d.peak(f).Power
		}
		return power
	}
	df := grid[1] - grid[0]
	turn, phase := make([]complex128, len(d.x)), make([]complex128, len(d.x))
	for i, x := range d.x {
		sin, cos := math.Sincos(2 * math.Pi * df * (x - d.x[0]))
		turn[i] = complex(cos, sin)
	}
	for k := range grid {
		if k%256 == 0 {
			for i, x := range d.x {
				sin, cos := math.Sincos(2 * math.Pi * grid[k] * (x - d.x[0]))
				phase[i] = complex(cos, sin)
			}
		}
		var c, s, cc, cs, yc, ys float64
		for i, e := range phase {
			w, cos, sin := d.w[i], real(e), imag(e)
			c += w * cos
			s += w * sin
			cc += w * cos * cos
			cs += w * cos * sin
			yc += w * d.y[i] * cos
			ys += w * d.y[i] * sin
			phase[i] = e * turn[i]
		}
		_, _, power[k] = d.solve(c, s, cc, cs, yc, ys)
	}
	return power
}

// refine climbs to the top of the peak within a grid step on either side, by
// golden sections.
func (d *sineData) refine(f float64, grid []float64) Peak {
	step := grid[0] / (gridPerCycle / 2)
	low, high := max(f-step, grid[0]), min(f+step, grid[len(grid)-1])
	const golden = 0.6180339887498949
	a, b := d.peak(high-golden*(high-low)), d.peak(low+golden*(high-low))
	for range 40 {
		if a.Power >= b.Power {
			high, b = b.Frequency, a
			a = d.peak(high - golden*(high-low))
		} else {
			low, a = a.Frequency, b
			b = d.peak(low + golden*(high-low))
		}
	}
	best := d.peak(f)
	for _, p := range []Peak{a, b} {
		if p.Power > best.Power {
			best = p
		}
	}
	return best
}

// condense returns the data sorted by x, without points that are not finite,
// and averaged in groups of neighbours where there are more than limit.
func condense(x, y, sigma []float64, limit int) (cx, cy, csigma []float64) {
	if len(x) != len(y) || sigma != nil && len(sigma) != len(y) {
		panic("fit: lengths of x, y and sigma differ")
	}
	var order []int
	for i := range x {
		if math.IsNaN(x[i]-x[i]) || math.IsNaN(y[i]-y[i]) || sigma != nil && !(sigma[i] > 0 && sigma[i] < math.Inf(1)) {
			continue
		}
		order = append(order, i)
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(x[a], x[b]) })
	groups := min(len(order), limit)
	for g := range groups {
		var w, wx, wy float64
		for _, i := range order[g*len(order)/groups : (g+1)*len(order)/groups] {
			weight := 1.0
			if sigma != nil {
				weight = 1 / (sigma[i] * sigma[i])
			}
			w += weight
			wx += weight * x[i]
			wy += weight * y[i]
		}
		if groups == len(order) { // as it was, to the bit
			wx, wy = x[order[g]], y[order[g]]
		} else {
			wx, wy = wx/w, wy/w
		}
		cx, cy = append(cx, wx), append(cy, wy)
		if sigma != nil {
			csigma = append(csigma, 1/math.Sqrt(w))
		}
	}
	return cx, cy, csigma
}
