package fit

import "math"

// differenceLevels is the number of steps that each slope is computed with,
// the first an eighth of the parameter, each later one half of the one before:
// from 0.1 to 4e-6 of it.
const differenceLevels = 16

// Differences makes a Model of residuals without slopes. These come from
// central differences with steps halved again and again, extrapolated to step
// zero, each slope by the extrapolation that changes least from its
// neighbours (C. J. F. Ridders, Adv. Eng. Software 4, 75 (1982)). For smooth
// residuals some twelve digits are right, at the price of 32 calls per
// parameter. Steps at which the residuals are not finite are left out.
//
// Steps may go past bounds of the fit by an eighth of a parameter; residuals
// that cannot be computed there are to be NaN.
func Differences(residuals func(params, residuals []float64) error) Model {
	return func(params, r, jacobian []float64) error {
		if err := residuals(params, r); err != nil || jacobian == nil {
			return err
		}
		d := differences{residuals: residuals, m: len(r), n: len(params)}
		d.x = append(d.x, params...)
		d.above, d.below = make([]float64, d.m), make([]float64, d.m)
		d.central = make([]float64, differenceLevels*d.m)
		for j := range params {
			if err := d.slope(j, jacobian); err != nil {
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
	steps        []float64
	central      []float64 // level × residual
	tableau      [differenceLevels]float64
	estimate     [differenceLevels]float64 // the best of each level
	doubt        [differenceLevels]float64 // its error, estimated
}

func (d *differences) slope(j int, jacobian []float64) error {
	at := d.x[j]
	defer func() { d.x[j] = at }()
	step := math.Abs(at) / 8
	if step == 0 {
		step = 1.0 / 8
	}
	d.steps = d.steps[:0]
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
			d.steps = d.steps[:0] // the extrapolation needs levels in a row
			continue
		}
		level := d.central[len(d.steps)*d.m:]
		for i := range d.m {
			level[i] = (d.above[i] - d.below[i]) / (up - down)
		}
		d.steps = append(d.steps, (up-down)/2)
	}
	for i := range d.m {
		jacobian[i*d.n+j] = d.extrapolate(i)
	}
	return nil
}

// extrapolate takes the central differences of residual i to step zero. Their
// error is a series in step², so that each order removes a power of four. NaN
// where no two levels could be computed.
func (d *differences) extrapolate(i int) float64 {
	levels := len(d.steps)
	if levels < 2 {
		return math.NaN()
	}
	// Over the last, smallest steps the differences change by rounding alone,
	// which grows with 1/step. Taking part in the estimates, it keeps
	// neighbours that agree by chance from winning.
	rounding := 0.0
	for k := max(levels-4, 1); k < levels; k++ {
		rounding = max(rounding, math.Abs(d.central[k*d.m+i]-d.central[(k-1)*d.m+i])*d.steps[k])
	}
	for k := range levels {
		value, power := d.central[k*d.m+i], 1.0
		d.estimate[k], d.doubt[k] = value, math.Inf(1)
		for order := range k {
			previous := d.tableau[order]
			d.tableau[order] = value
			power *= 4
			next := value + (value-previous)/(power-1)
			change := max(math.Abs(next-value), math.Abs(next-previous)) + rounding/d.steps[k]
			if change < d.doubt[k] {
				d.doubt[k], d.estimate[k] = change, next
			}
			value = next
		}
		d.tableau[k] = value
	}
	// The smallest steps cannot miss how the residual turns, larger ones are
	// more precise. So go from small to large while they agree: beyond a narrow
	// line all large steps give the same wrong zero.
	best := levels - 1
	for k := levels - 2; k > 0; k-- {
		if math.Abs(d.estimate[k]-d.estimate[best]) > 10*d.doubt[best] {
			break
		}
		if d.doubt[k] < d.doubt[best] {
			best = k
		}
	}
	return d.estimate[best]
}

func finite(list []float64) bool {
	for _, v := range list {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}
