package fit

import (
	"math"
	"strings"
)

// searchScale is the scale on which a search moves an unknown. A lifetime is
// searched as a rate, because the data see the rate: "as long as you like" is
// the finite place 0 there, and errors are even. The width of a spread is
// searched as its square, on which an average depends smoothly at zero.
type searchScale int

const (
	plainScale searchScale = iota
	rateScale
	squareScale
)

// value is the unknown itself at the place q of the search.
func (s searchScale) value(q float64) float64 {
	switch s {
	case rateScale:
		return 1 / q
	case squareScale:
		return math.Sqrt(q)
	}
	return q
}

// place is the inverse of value.
func (s searchScale) place(v float64) float64 {
	switch s {
	case rateScale:
		return 1 / v
	case squareScale:
		return v * v
	}
	return v
}

// slope is d value/dq.
func (s searchScale) slope(q float64) float64 {
	switch s {
	case rateScale:
		return -1 / (q * q)
	case squareScale:
		return 0.5 / math.Sqrt(q)
	}
	return 1
}

// rescale puts lifetimes and spreads on their scales. The far ends, where
// nothing could be seen any more, are cut off: a rate of nothing and a width of
// nothing have no slope to follow.
func (p *problem) rescale() {
	for i := range p.params {
		u := &p.params[i]
		off := u.dial.Off
		switch {
		case off != nil && math.IsInf(*off, 1):
			u.scale = rateScale
		case strings.HasPrefix(u.dial.Path, "spread.") && strings.HasSuffix(u.dial.Path, ".sigma"):
			u.scale = squareScale
		default:
			continue
		}
		axis := p.axis(i)
		if len(axis) == 0 {
			u.scale = plainScale
			continue
		}
		low, high := math.Max(u.low, axis[0]*1e-2), math.Min(u.high, axis[len(axis)-1]*1e3)
		if !(high > low) {
			u.scale = plainScale
			continue
		}
		u.cut = low > u.low
		if u.scale == rateScale {
			u.cut = high < u.high
		}
		start := math.Max(low, math.Min(high, u.start))
		u.low, u.high, u.start = u.scale.place(low), u.scale.place(high), u.scale.place(start)
		if u.scale == rateScale {
			u.low, u.high = u.high, u.low
		}
	}
	for _, m := range p.traces {
		m.scales = m.scales[:0]
		for _, i := range m.free {
			m.scales = append(m.scales, p.params[i].scale)
		}
	}
}
