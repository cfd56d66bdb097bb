package fit

import "math"

// differenceLevels is the number of steps that each slope is computed with,
// the first a sixteenth of the parameter, each later one half of the one
// before: from 0.06 to 4e-6 of it.
const differenceLevels = 15

// Differences makes a Model of residuals without slopes. These come from
// central differences with steps halved again and again, extrapolated to step
// zero, each slope by the extrapolation that changes least from its
// neighbours (C. J. F. Ridders, Adv. Eng. Software 4, 75 (1982)). For smooth
// residuals some twelve digits are right, at the price of 30 calls per
// parameter. Steps at which the residuals are not finite are left out.
//
// Steps may go past bounds of the fit by a sixteenth of a parameter; residuals
// that cannot be computed there are to be NaN.
func Differences(residuals func(params, residuals []float64) error) Model {
	return func(params, r, jacobian []float64) error {
		if err := residuals(params, r); err != nil || jacobian == nil {
			return err
		}
		d := differences{residuals: residuals, m: len(r), n: len(params)}
		d.x = append(d.x, params...)
		d.above, d.below = make([]float64, d.m), make([]float64, d.m)
		d.row = make([]float64, differenceLevels*d.m)
		d.change = make([]float64, d.m)
		for j := range params {
			if err := d.slope(j, r, jacobian); err != nil {
				return err
			}
		}
		return nil
	}
}

type differences struct {
	residuals    func(params, residuals []float64) error
	m, n         int
	x            []float64
	above, below []float64
	row          []float64 // extrapolations of the last level: order × residual
	change       []float64 // of the best extrapolation so far
}

func (d *differences) slope(j int, r, jacobian []float64) error {
	at := d.x[j]
	defer func() { d.x[j] = at }()
	step := math.Abs(at) / 16
	if step == 0 {
		step = 1.0 / 16
	}
	for i := range d.m {
		d.change[i] = math.Inf(1)
		jacobian[i*d.n+j] = math.NaN()
	}
	levels := 0
	for range differenceLevels {
		up, down := at+step, at-step
		step /= 2
		d.x[j] = up
		clear(d.above)
		if err := d.residuals(d.x, d.above); err != nil {
			return err
		}
		d.x[j] = down
		clear(d.below)
		if err := d.residuals(d.x, d.below); err != nil {
			return err
		}
		if !finite(d.above) || !finite(d.below) {
			levels = 0 // the extrapolation needs levels in a row
			continue
		}
		for i := range d.m {
			d.extrapolate(i, levels, (d.above[i]-d.below[i])/(up-down), math.Abs(r[i])/(up-down), &jacobian[i*d.n+j])
		}
		levels++
	}
	return nil
}

// extrapolate adds one level to the tableau of residual i: the error of a
// central difference is a series in step², so that each order removes a power
// of four.
func (d *differences) extrapolate(i, level int, value, noise float64, best *float64) {
	if level == 0 && math.IsInf(d.change[i], 1) {
		*best = value
	}
	power := 1.0
	for order := range level {
		previous := d.row[order*d.m+i]
		d.row[order*d.m+i] = value
		power *= 4
		next := value + (value-previous)/(power-1)
		// The rounding of the residuals bounds the error from below, so that
		// two neighbours that agree by chance do not win.
		change := max(math.Abs(next-value), math.Abs(next-previous)) + 1e-16*noise
		if change < d.change[i] {
			d.change[i], *best = change, next
		}
		value = next
	}
	d.row[level*d.m+i] = value
}

func finite(list []float64) bool {
	for _, v := range list {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}
