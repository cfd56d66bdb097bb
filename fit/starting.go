package fit

import (
	"cmp"
	"math"
	"slices"
)

// An Oscillation is a damped sine read from data:
//
//	y = Offset + Amplitude e^{−(x−x₀)/DecayTime} cos(2π Frequency x + Phase),
//
// x₀ the smallest x. DecayTime is +Inf where the data show no decay.
type Oscillation struct {
	Offset, Amplitude, Phase, Frequency, DecayTime float64
	// ChiSquare is the weighted sum of squares that it leaves.
	ChiSquare float64
}

// Oscillations returns at most count damped sines that describe y at x, best
// first: the frequencies are the peaks of the periodogram, refined together
// with the decay by least squares. sigma may be nil. They are meant as starting
// values: several come back because the highest peak can be an alias or a side
// peak. Frequencies are at least a fifth of a cycle over the window.
func Oscillations(x, y, sigma []float64, count int) []Oscillation {
	x, y, sigma = condense(x, y, sigma, 4000)
	var found []Oscillation
	for _, peak := range Peaks(x, y, sigma, count) {
		best := Oscillation{ChiSquare: math.Inf(1)}
		window := x[len(x)-1] - x[0]
		for _, rate := range []float64{0, 0.3, 1, 3, 10, 30} {
			o, ok := oscillation(x, y, sigma, peak, rate/window)
			if ok && o.ChiSquare < best.ChiSquare {
				best = o
			}
		}
		known := slices.ContainsFunc(found, func(o Oscillation) bool {
			return math.Abs(o.Frequency-best.Frequency) < 0.05/window
		})
		if !known && !math.IsInf(best.ChiSquare, 1) {
			found = append(found, best)
		}
	}
	slices.SortStableFunc(found, func(a, b Oscillation) int { return cmp.Compare(a.ChiSquare, b.ChiSquare) })
	return found
}

func oscillation(x, y, sigma []float64, peak Peak, rate float64) (Oscillation, bool) {
	zero := x[0]
	window := x[len(x)-1] - zero
	c := Curve{X: x, Y: y, Sigma: sigma,
		// offset, cosine, sine, frequency, rate
		F: func(x float64, p []float64) float64 {
			sin, cos := math.Sincos(2 * math.Pi * p[3] * (x - zero))
			return p[0] + math.Exp(-p[4]*(x-zero))*(p[1]*cos+p[2]*sin)
		},
		Slopes: func(x float64, p, slopes []float64) {
			t := x - zero
			sin, cos := math.Sincos(2 * math.Pi * p[3] * t)
			e := math.Exp(-p[4] * t)
			slopes[0], slopes[1], slopes[2] = 1, e*cos, e*sin
			slopes[3] = 2 * math.Pi * t * e * (p[2]*cos - p[1]*sin)
			slopes[4] = -t * e * (p[1]*cos + p[2]*sin)
		},
	}
	// The peak fixes the frequency to about one cycle over the decay time.
	room := 1/window + rate
	inf := math.Inf(1)
	sin, cos := math.Sincos(2*math.Pi*peak.Frequency*zero + peak.Phase)
	start := []float64{peak.Offset, peak.Amplitude * cos, -peak.Amplitude * sin, peak.Frequency, rate}
	res, err := c.Fit(start, &Settings{
		Lower:      []float64{-inf, -inf, -inf, max(peak.Frequency-room, 0.2/window), 0},
		Upper:      []float64{inf, inf, inf, peak.Frequency + room, 300 / window},
		Tolerance:  1e-4,
		Iterations: 30, Restarts: -1, Reach: 100,
	})
	if err != nil {
		return Oscillation{}, false
	}
	p := res.Params
	o := Oscillation{Offset: p[0], Amplitude: math.Hypot(p[1], p[2]), Frequency: p[3], DecayTime: 1 / p[4], ChiSquare: res.ChiSquare}
	o.Phase = math.Remainder(-math.Atan2(p[2], p[1])-2*math.Pi*p[3]*zero, 2*math.Pi)
	return o, true
}

// A Relaxation is an exponential approach read from data:
// y = Offset + Amplitude e^{−(x−x₀)/Time}, x₀ the smallest x.
type Relaxation struct {
	Offset, Amplitude, Time, ChiSquare float64
}

// Relax reads the exponential that describes y at x best; sigma may be nil.
// false: fewer than three points that differ in x.
func Relax(x, y, sigma []float64) (Relaxation, bool) {
	x, y, sigma = condense(x, y, sigma, 4000)
	if len(x) < 3 || x[0] == x[len(x)-1] {
		return Relaxation{}, false
	}
	zero, window := x[0], x[len(x)-1]-x[0]
	best := Relaxation{ChiSquare: math.Inf(1)}
	shape := make([]float64, len(x))
	at := func(logTime float64) float64 {
		time := window * math.Exp(logTime)
		for i := range x {
			shape[i] = math.Exp(-(x[i] - zero) / time)
		}
		offset, amplitude, chi2 := onBackground(y, sigma, shape)
		if chi2 < best.ChiSquare {
			best = Relaxation{offset, amplitude, time, chi2}
		}
		return chi2
	}
	// From a thousandth of the window to ten of it; then a golden section
	// between the neighbours of the best.
	const steps = 40
	low, high := math.Log(1e-3), math.Log(10)
	least, where := math.Inf(1), 0
	for k := range steps + 1 {
		if chi2 := at(low + (high-low)*float64(k)/steps); chi2 < least {
			least, where = chi2, k
		}
	}
	step := (high - low) / steps
	center := low + step*float64(where)
	minimize(at, center-step, center+step)
	return best, true
}

// A Line is a resonance read from data, of Lorentzian shape:
// y = Offset + Height/(1 + 4 (x − Centre)²/Width²). Width is the full width at
// half maximum; a dip has a negative Height.
type Line struct {
	Centre, Width, Height, Offset, ChiSquare float64
}

// Lines returns at most count lines that describe y at x, each alone on a
// constant, best first; sigma may be nil. None come from fewer than four
// points or a constant y.
func Lines(x, y, sigma []float64, count int) []Line {
	x, y, sigma = condense(x, y, sigma, 400)
	if len(x) < 4 || x[0] == x[len(x)-1] {
		return nil
	}
	if newSineData(x, y, sigma).total == 0 {
		return nil
	}
	window := x[len(x)-1] - x[0]
	narrow := 1.5 * window / float64(len(x))
	const steps = 12
	shape := make([]float64, len(x))
	try := func(centre, width float64) Line {
		for i := range x {
			u := 2 * (x[i] - centre) / width
			shape[i] = 1 / (1 + u*u)
		}
		offset, height, chi2 := onBackground(y, sigma, shape)
		return Line{centre, width, height, offset, chi2}
	}
	best := make([]Line, len(x))
	for k := range x {
		best[k].ChiSquare = math.Inf(1)
		for s := range steps {
			width := narrow * math.Pow(window/narrow, float64(s)/(steps-1))
			if l := try(x[k], width); l.ChiSquare < best[k].ChiSquare {
				best[k] = l
			}
		}
	}
	var found []Line
	for k, l := range best {
		if (k > 0 && best[k-1].ChiSquare < l.ChiSquare) || (k < len(best)-1 && best[k+1].ChiSquare <= l.ChiSquare) {
			continue
		}
		found = append(found, l)
	}
	slices.SortStableFunc(found, func(a, b Line) int { return cmp.Compare(a.ChiSquare, b.ChiSquare) })
	found = found[:min(count, len(found))]
	for k := range found {
		found[k] = refineLine(x, y, sigma, found[k], narrow)
	}
	slices.SortStableFunc(found, func(a, b Line) int { return cmp.Compare(a.ChiSquare, b.ChiSquare) })
	return found
}

func refineLine(x, y, sigma []float64, l Line, narrow float64) Line {
	c := Curve{X: x, Y: y, Sigma: sigma,
		F: func(x float64, p []float64) float64 {
			u := 2 * (x - p[0]) / p[1]
			return p[3] + p[2]/(1+u*u)
		},
		Slopes: func(x float64, p, slopes []float64) {
			u := 2 * (x - p[0]) / p[1]
			shape := 1 / (1 + u*u)
			slopes[0] = p[2] * shape * shape * 4 * u / p[1]
			slopes[1] = p[2] * shape * shape * 2 * u * u / p[1]
			slopes[2], slopes[3] = shape, 1
		},
	}
	inf := math.Inf(1)
	res, err := c.Fit([]float64{l.Centre, l.Width, l.Height, l.Offset}, &Settings{
		Lower:      []float64{max(x[0], l.Centre-l.Width), narrow / 10, -inf, -inf},
		Upper:      []float64{min(x[len(x)-1], l.Centre+l.Width), 3 * (x[len(x)-1] - x[0]), inf, inf},
		Tolerance:  1e-4,
		Iterations: 30, Restarts: -1,
	})
	if err != nil || res.ChiSquare > l.ChiSquare {
		return l
	}
	return Line{res.Params[0], res.Params[1], res.Params[2], res.Params[3], res.ChiSquare}
}

// onBackground fits offset + height·shape by weighted linear least squares.
func onBackground(y, sigma, shape []float64) (offset, height, chi2 float64) {
	weight := func(i int) float64 {
		if sigma == nil {
			return 1
		}
		return 1 / (sigma[i] * sigma[i])
	}
	var w, ws, wy float64
	for i := range y {
		w += weight(i)
		ws += weight(i) * shape[i]
		wy += weight(i) * y[i]
	}
	ws, wy = ws/w, wy/w
	var ss, sy float64
	for i := range y {
		ss += weight(i) * (shape[i] - ws) * (shape[i] - ws)
		sy += weight(i) * (shape[i] - ws) * (y[i] - wy)
	}
	if ss > 1e-20*w {
		height = sy / ss
	}
	offset = wy - height*ws
	for i := range y {
		r := y[i] - offset - height*shape[i]
		chi2 += weight(i) * r * r
	}
	return offset, height, chi2
}

// minimize evaluates f by golden sections of the interval.
func minimize(f func(float64) float64, low, high float64) {
	const golden = 0.6180339887498949
	a, b := high-golden*(high-low), low+golden*(high-low)
	fa, fb := f(a), f(b)
	for range 30 {
		if fa <= fb {
			high, b, fb = b, a, fa
			a = high - golden*(high-low)
			fa = f(a)
		} else {
			low, a, fa = a, b, fb
			b = low + golden*(high-low)
			fb = f(b)
		}
	}
}
