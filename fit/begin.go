package fit

import (
	"math"
	"sort"
)

// Where a search begins. Along each unknown the sum of squares is scanned over
// the range that the data can tell apart, with scales and offsets solved for at
// every point (they enter linearly: G. H. Golub, V. Pereyra, SIAM J. Numer.
// Anal. 10, 413 (1973)), and the best places are where searches begin. A fringe
// has many minima; a grid finer than its own width finds the right one.

// place is a start with the sum of squares that it leaves.
type place struct {
	params     []float64
	left, cost float64
}

const (
	mostScan = 3000 // points along one unknown
	begins   = 6    // searches
)

// starts finds where to begin, best first; the file's own values come too.
func (p *problem) starts() ([]place, error) {
	own := make([]float64, len(p.params))
	for i, u := range p.params {
		own[i] = u.start
	}
	first, err := p.settleFactors(own)
	if err != nil {
		return nil, err
	}
	found := []place{first}
	axes := make([][]float64, len(p.params))
	var oscillating, other []int
	for i := range p.params {
		if p.isFactor(i) {
			continue
		}
		axes[i] = p.places(i)
		if len(axes[i]) > 40 {
			oscillating = append(oscillating, i)
		} else {
			other = append(other, i)
		}
	}
	// Frequencies are scanned for several settings of what damps or scales
	// them: with too short a decay there is no fringe to find. Spreads only damp
	// a fringe and are left out for this.
	bases := [][]float64{own}
	if len(oscillating) > 0 {
		bases = p.settings(own, other, axes)
	}
	for _, axis := range axes {
		p.total += len(bases) * len(axis)
	}
	p.use(central)
	var fringes []place
	for _, base := range bases {
		for _, i := range oscillating {
			line, err := p.along(base, i, axes[i])
			if err != nil {
				return nil, err
			}
			fringes = append(fringes, line...)
		}
	}
	p.sort(fringes)
	p.use(rough)
	candidates := append([]place{first}, fringes[:min(len(fringes), begins)]...)
	for _, c := range candidates {
		best := c
		for _, i := range other {
			line, err := p.along(best.params, i, axes[i])
			if err != nil {
				return nil, err
			}
			found = append(found, line[min(len(line), 1):]...)
			if len(line) > 0 && line[0].left < best.left || best.left == c.left && len(line) > 0 {
				best = line[0]
			}
		}
		found = append(found, best)
	}
	if len(oscillating) > 1 { // each frequency again, beside the others
		p.sort(found)
		for _, i := range oscillating {
			line, err := p.along(found[0].params, i, axes[i])
			if err != nil {
				return nil, err
			}
			found = append(found, line...)
		}
	}
	p.sort(found)
	return p.apart(found, axes), nil
}

// sort puts the best places first. An alias must be clearly better than a
// frequency below half the sampling rate, or its many equals crowd that out.
func (p *problem) sort(list []place) {
	for i := range list {
		list[i].cost = list[i].left
		if p.aliased(list[i].params) {
			list[i].cost *= 1.05
		}
	}
	sort.SliceStable(list, func(i, j int) bool { return list[i].cost < list[j].cost })
}

// settings are starts that differ in the slow unknowns: the file's values, and
// each of them far to either side.
func (p *problem) settings(own []float64, other []int, axes [][]float64) [][]float64 {
	list := [][]float64{own}
	for _, i := range other {
		for _, k := range []int{len(axes[i]) / 3, 2 * len(axes[i]) / 3} {
			if len(axes[i]) > 0 {
				at := append([]float64(nil), own...)
				at[i] = axes[i][k]
				list = append(list, at)
			}
		}
	}
	return list[:min(len(list), 5)]
}

// along scans one unknown and returns the lowest places, best first.
func (p *problem) along(base []float64, i int, axis []float64) ([]place, error) {
	var line []place
	for _, v := range axis {
		at := append([]float64(nil), base...)
		at[i] = v
		one, err := p.settleFactors(at)
		if err != nil {
			return nil, err
		}
		line = append(line, one)
	}
	var low []place // local minima of the scan
	for k, one := range line {
		if (k == 0 || one.left <= line[k-1].left) && (k == len(line)-1 || one.left <= line[k+1].left) && !math.IsInf(one.left, 0) {
			low = append(low, one)
		}
	}
	sort.SliceStable(low, func(a, b int) bool { return low[a].left < low[b].left })
	return low[:min(len(low), begins)], nil
}

// apart keeps starts that are not next to one another.
func (p *problem) apart(found []place, axes [][]float64) (kept []place) {
next:
	for _, f := range found {
		for _, k := range kept {
			near := true
			for i := range f.params {
				if n := len(axes[i]); n > 1 {
					near = near && math.Abs(rank(axes[i], f.params[i])-rank(axes[i], k.params[i])) <= 2
				}
			}
			if near {
				continue next
			}
		}
		if kept = append(kept, f); len(kept) == begins {
			break
		}
	}
	return kept
}

// rank is the place of a value among the sorted values of an axis.
func rank(axis []float64, v float64) float64 { return float64(sort.SearchFloat64s(axis, v)) }

// isFactor reports whether a parameter is the scale or offset of a trace.
func (p *problem) isFactor(i int) bool {
	for _, m := range p.traces {
		if m.scale.param == i || m.offset.param == i {
			return true
		}
	}
	return false
}

// places is axis on the scale of the search, increasing.
func (p *problem) places(i int) []float64 {
	u := p.params[i]
	if u.scale == plainScale {
		return p.axis(i)
	}
	plain := *p
	plain.params = append([]parameter(nil), p.params...)
	one := &plain.params[i]
	one.start, one.low, one.high = u.scale.value(u.start), u.scale.value(u.low), u.scale.value(u.high)
	one.low, one.high = math.Min(one.low, one.high), math.Max(one.low, one.high)
	one.scale = plainScale
	var out []float64
	for _, v := range plain.axis(i) {
		out = append(out, u.scale.place(v))
	}
	sort.Float64s(out)
	return out
}

// axis lists the values of an unknown that are worth a look.
func (p *problem) axis(i int) []float64 {
	u := p.params[i]
	low, high := u.low, u.high
	w := p.window(i)
	span, kind := w.high-w.low, w.unit
	dimension := u.dial.Unit
	inverse := map[string]string{"Hz": "s", "s": "Hz", "1/s": "s"}[dimension]
	switch {
	case dimension == "rad":
		return even(math.Max(low, u.start-math.Pi), math.Min(high, u.start+math.Pi), 25)
	case p.oscillates(i, kind):
		// A frequency seen in time: a fifth of a cycle over the window apart.
		low, high = u.frequencies(span, 0.5/w.step)
		return even(low, high, int(math.Min(mostScan, math.Max(41, (high-low)*span*5))))
	case kind == dimension && u.dial.Low < 0:
		// A place on the axis that is scanned, a line's centre, near the
		// file's value or on that axis.
		n := int(math.Max(60, math.Min(mostScan/10, span/w.step)))
		places := even(math.Max(low, u.start-span), math.Min(high, u.start+span), 2*n+1)
		return merged(places, even(math.Max(low, w.low), math.Min(high, w.high), n+1))
	case u.dial.Low >= 0 && (inverse == kind || kind == dimension || dimension == "s" || dimension == "Hz" || dimension == "1/s"):
		size := span
		if kind != dimension && kind != "" {
			size = 1 / span
		}
		a, b := 0.03*math.Min(size, math.Max(u.start, size/100)), 30*math.Max(size, math.Min(u.start, size*100))
		if math.IsInf(u.start, 0) || u.start == 0 {
			a, b = 0.03*size, 30*size
		}
		return geometric(math.Max(a, math.Max(u.low, a*1e-3)), math.Min(b, u.high), 25)
	case !math.IsInf(low, 0) && !math.IsInf(high, 0):
		return even(low, high, 25)
	}
	reach := math.Max(math.Abs(u.start), 1)
	return even(math.Max(low, u.start-2*reach), math.Min(high, u.start+2*reach), 25)
}

// oscillates tells that an unknown is a frequency of what is scanned in time.
func (p *problem) oscillates(i int, kind string) bool {
	d := &p.params[i].dial
	return d.Unit == "Hz" && kind == "s" && d.Off == nil
}

// frequencies is where a frequency seen in time is looked for: within the
// bounds that the user gave, else as far as the sampling can tell (most).
func (u *parameter) frequencies(span, most float64) (low, high float64) {
	low, high = -most, most
	givenLow, givenHigh := u.low > u.dial.Low, u.high < u.dial.High
	switch {
	case givenLow && givenHigh:
		low, high = u.low, u.high
	case givenLow:
		low, high = u.low, math.Max(high, u.low+most)
	case givenHigh:
		low, high = math.Min(low, u.high-most), u.high
	}
	if u.dial.Low == 0 {
		low = math.Max(low, 0.1/span)
	}
	return math.Max(low, u.low), math.Min(high, u.high)
}

// window is what the traces of an unknown scan: the extent of the widest, its
// usual step, and the unit; 0 to 1 where nothing is scanned.
type window struct {
	low, high, step float64
	unit            string
}

func (p *problem) window(i int) window {
	best := window{0, 1, 1, ""}
	span := 0.0
	for t, m := range p.traces {
		if p.params[i].trace >= 0 && p.params[i].trace != t {
			continue
		}
		x, unit := m.axis()
		sorted := append([]float64(nil), x...)
		sort.Float64s(sorted)
		var gaps []float64
		for k := 1; k < len(sorted); k++ {
			if d := sorted[k] - sorted[k-1]; d > 0 {
				gaps = append(gaps, d)
			}
		}
		if len(gaps) == 0 {
			continue
		}
		sort.Float64s(gaps)
		first, last := sorted[0], sorted[len(sorted)-1]
		if last-first > span {
			span, best = last-first, window{first, last, gaps[len(gaps)/2], unit}
		}
	}
	return best
}

// axis is what a trace scans, for figures and ranges: its first dial or time.
func (m *measured) axis() (x []float64, unit string) {
	if m.trace.Times != nil {
		return m.trace.Times, "s"
	}
	for _, row := range m.trace.Points {
		x = append(x, row[0])
	}
	return x, m.unit
}

func even(a, b float64, n int) []float64 {
	if !(b > a) {
		return nil
	}
	v := make([]float64, n)
	for k := range v {
		v[k] = a + (b-a)*float64(k)/float64(n-1)
	}
	return v
}

// merged joins two increasing lists into one.
func merged(a, b []float64) []float64 {
	out := append(append([]float64(nil), a...), b...)
	sort.Float64s(out)
	return out
}

func geometric(a, b float64, n int) []float64 {
	if !(b > a) || a <= 0 {
		return nil
	}
	v := make([]float64, n)
	for k := range v {
		v[k] = a * math.Pow(b/a, float64(k)/float64(n-1))
	}
	v[n-1] = b
	return v
}

// settleFactors solves for unknown scales and offsets, which enter linearly,
// and gives the sum of squares that is left; +Inf where the model cannot be
// evaluated.
func (p *problem) settleFactors(params []float64) (place, error) {
	out := append([]float64(nil), params...)
	left := 0.0
	if p.done++; p.progress != nil && p.total > 0 {
		p.progress(min(p.done, p.total), p.total)
	}
	for _, m := range p.traces {
		if err := m.predict(p.ctx, out, false); err != nil {
			if p.ctx.Err() != nil {
				return place{}, p.ctx.Err()
			}
			if !p.inside(out) || len(params) == 0 {
				return place{params: out, left: math.Inf(1)}, nil
			}
			return place{}, err
		}
		m.solveFactors(p, out)
		scale, offset := m.scale.at(out), m.offset.at(out)
		for i, y := range m.y {
			r := (offset + scale*m.pred[i] - y) / m.sigma[i]
			left += r * r
		}
	}
	return place{params: out, left: left}, nil
}

// solveFactors is weighted linear regression of the trace on its prediction,
// with whichever of scale and offset is unknown.
func (m *measured) solveFactors(p *problem, params []float64) {
	var sw, sp, spp, sy, spy float64
	for i, y := range m.y {
		w := 1 / (m.sigma[i] * m.sigma[i])
		sw += w
		sp += w * m.pred[i]
		spp += w * m.pred[i] * m.pred[i]
		sy += w * y
		spy += w * m.pred[i] * y
	}
	set := func(f factor, v float64) {
		if u := p.params[f.param]; !math.IsNaN(v) && !math.IsInf(v, 0) {
			params[f.param] = math.Max(u.low, math.Min(u.high, v))
		}
	}
	scale, offset := m.scale.at(params), m.offset.at(params)
	switch det := sw*spp - sp*sp; {
	case m.scale.param >= 0 && m.offset.param >= 0 && det > 1e-12*sw*spp:
		set(m.scale, (sw*spy-sp*sy)/det)
		set(m.offset, (sy-m.scale.at(params)*sp)/sw)
	case m.scale.param >= 0 && m.offset.param < 0 && spp > 0:
		set(m.scale, (spy-offset*sp)/spp)
	case m.offset.param >= 0:
		set(m.offset, (sy-scale*sp)/sw)
	}
}
