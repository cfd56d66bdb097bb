package fit

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"rhotrace/io/quantity"
)

// doubts puts into words what the user must know before believing the numbers.
func (p *problem) doubts(a *Answer, r *Result, others []*Result) {
	warn := func(format string, args ...any) { a.Warnings = append(a.Warnings, fmt.Sprintf(format, args...)) }
	if !r.Status.Converged() {
		warn("the search did not come to an end: %v", r.Status)
	}
	if r.DegreesOfFreedom < 1 {
		warn("there are no more points than unknowns, so nothing tells how good the fit is and errors are not known")
	}
	for _, i := range r.AtBound {
		u := &a.Unknowns[i]
		if limit, open := p.limit(r, i, 1.645); open {
			word := "longer than"
			if p.params[i].scale == squareScale {
				word = "less than"
			}
			warn("%s is not constrained by these data: %s about %s (95 %%), and any value beyond fits as well", u.Name, word, u.Format(roundTo(limit, 2)))
			continue
		}
		warn("%s stands at its bound %s; widen low and high, or the data say nothing about it", u.Name, u.Format(u.Value))
	}
	for i := range a.Unknowns {
		p.openUnknown(a, i, warn)
	}
	names := make([]string, len(p.params))
	for i, u := range a.Unknowns {
		names[i] = u.Name
	}
	for _, d := range r.Directions {
		if len(d.Params) > 1 && d.Condition > 1e3 {
			warn("%s", d.Words(names))
		}
	}
	for _, o := range others {
		almost := ""
		if o.ChiSquare > r.ChiSquare+4*p.unit(r) {
			almost = "almost "
		}
		warn("another answer fits %sas well: %s (sum of squares %.4g against %.4g)", almost, p.describe(a, o.Params), o.ChiSquare, r.ChiSquare)
	}
	if r.ErrorsKnown && r.DegreesOfFreedom >= 1 {
		switch q := ChiSquareProbability(r.ChiSquare, r.DegreesOfFreedom); {
		case q < 1e-3:
			warn("the residuals are larger than the errors allow (reduced chi-square %.3g, probability %.1g): the model lacks something or the errors are too small; the errors printed do not make up for it", a.ReducedChiSquare, q)
		case q > 1-1e-4:
			warn("the residuals are smaller than the errors (reduced chi-square %.3g): the errors given are too large", a.ReducedChiSquare)
		}
	}
	for k := range a.Traces {
		noise(&a.Traces[k], len(a.Traces) > 1, p.traces[k].unit, warn)
	}
}

// openUnknown tells what the data leave open.
func (p *problem) openUnknown(a *Answer, i int, warn func(string, ...any)) {
	u := &a.Unknowns[i]
	switch {
	case math.IsInf(u.Error, 1):
		warn("%s is not constrained by these data", u.Name)
	case math.IsNaN(u.Error):
	case u.dial.Off != nil && math.IsInf(*u.dial.Off, 1) && u.Error > 0.4*u.Value:
		// What is measured is the rate, the inverse: a one-sided limit, 95 %.
		rate := 1/u.Value + 1.645*u.Error/(u.Value*u.Value)
		warn("%s is not constrained upwards by these data: longer than about %s (95 %%)", u.Name, u.Format(roundTo(1/rate, 2)))
	case u.dial.Off != nil && math.IsInf(*u.dial.Off, 1) && u.Error > 0.1*u.Value && p.beyond(i, u.Value):
		warn("%s is hardly constrained by these data: it is several times as long as what they scan, and any other slow change of the signal looks the same", u.Name)
	case u.dial.Off != nil && *u.dial.Off == 0 && u.Error > 0.6*math.Abs(u.Value):
		warn("%s is not told from zero by these data: less than about %s (95 %%)", u.Name, u.Format(roundTo(u.Value+1.645*u.Error, 2)))
	case u.dial.Unit != "1" && u.dial.Unit != "rad" && u.dial.Low >= 0 && u.Error > math.Abs(u.Value):
		warn("%s is hardly constrained by these data: its error is larger than its value", u.Name)
	}
}

// beyond tells that a time is several times as long as what the traces scan.
func (p *problem) beyond(i int, v float64) bool {
	w := p.window(i)
	return w.unit == "s" && v > 3*math.Max(w.high, w.high-w.low)
}

// limit is the one-sided limit of an unknown that stands where nothing could be
// seen of it: where the sum of squares, the other unknowns following, has grown
// by z² times what one standard error adds. It grows by slope·q + (q/se)² there.
// open: the place is within one standard error of nothing at all.
func (p *problem) limit(r *Result, i int, z float64) (limit float64, open bool) {
	u := &p.params[i]
	q := r.Params[i]
	if u.scale == plainScale || math.Abs(q-u.low) > 1e-9*math.Abs(u.low) {
		return 0, false
	}
	se := math.Sqrt(p.unit(r)) / r.lengthBeside(i)
	if !(q < se) || math.IsInf(se, 0) {
		return 0, false
	}
	slope := 0.0
	for row, v := range r.Residuals {
		slope += 2 * v * r.Jacobian[row*len(p.params)+i]
	}
	half := 0.5 * math.Max(slope, 0) * se / p.unit(r)
	return u.scale.value(q + se*(math.Sqrt(half*half+z*z)-half)), true
}

func (p *problem) describe(a *Answer, params []float64) string {
	var parts []string
	for i := range a.Unknowns {
		if !p.isFactor(i) {
			parts = append(parts, a.Unknowns[i].Name+" = "+a.Unknowns[i].Format(roundTo(p.params[i].scale.value(params[i]), 4)))
		}
	}
	return strings.Join(parts, ", ")
}

// noise tests whether residuals look like noise: runs of one sign, neighbours
// alike, and a frequency that is left over.
func noise(f *Fitted, several bool, unit string, warn func(string, ...any)) {
	name := "the residuals"
	if several {
		name = "the residuals of " + f.Name
	}
	order := make([]int, len(f.X)) // along the axis, whatever the order of the rows
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(f.X[a], f.X[b]) })
	x, normal := make([]float64, len(order)), make([]float64, len(order))
	for k, i := range order {
		if f.Error[i] == 0 {
			return // an exact fit
		}
		x[k], normal[k] = f.X[i], f.Residual[i]/f.Error[i]
	}
	alike := Autocorrelation(normal)
	n := float64(len(normal))
	if runs := RunsTest(normal); runs.TooFew >= 1e-3 && n >= 12 && alike > 3.5/math.Sqrt(n)-1/n {
		warn("%s are not noise: neighbours resemble one another (correlation %.2f)", name, alike)
	} else if runs.TooFew < 1e-3 {
		warn("%s are not noise: they keep their sign for long (%d runs where %.0f are expected, probability %.1g)", name, runs.Runs, runs.Expected, runs.TooFew)
	}
	if len(normal) < 12 {
		return
	}
	span := x[len(x)-1] - x[0]
	// Less than one and a half cycles are a drift, which the runs show.
	if peaks := Peaks(x, normal, nil, 1); len(peaks) > 0 && peaks[0].FalseAlarm < 1e-4 && peaks[0].Frequency*span > 1.5 {
		left := fmt.Sprintf("a period of %.3g", 1/peaks[0].Frequency)
		switch unit {
		case "s", "":
			left = "a frequency of " + quantity.Format(roundTo(peaks[0].Frequency, 3), quantity.Frequency)
		case "Hz":
			left = "a period of " + quantity.Format(roundTo(1/peaks[0].Frequency, 3), quantity.Frequency)
		}
		warn("%s are not noise: %s is left over (chance %.1g)", name, left, peaks[0].FalseAlarm)
	}
}

func roundTo(v float64, digits int) float64 {
	out, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64)
	return out
}
