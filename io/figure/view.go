package figure

import (
	"math"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// A span is a range of values that grows as it meets them.
type span struct{ low, high float64 }

func emptySpan() span { return span{math.Inf(1), math.Inf(-1)} }

func (s *span) meet(v float64) { s.low, s.high = min(s.low, v), max(s.high, v) }

func (s *span) unite(o span) { s.low, s.high = min(s.low, o.low), max(s.high, o.high) }

// A view is an axis as it is drawn.
type view struct {
	scale
	log       bool
	low, high float64 // its ends, in the numbers shown
	ticks     []tick
	label     string
}

// viewOf lays an axis over the values, with room at both ends as a share of
// the range. A range that is nothing but rounding counts as one value, which
// comes to stand in the middle.
func viewOf(a Axis, s span, room float64) view {
	if max(math.Abs(s.low), math.Abs(s.high)) < smallest {
		s = span{0, 0}
	}
	if a.Log {
		low, high := math.Log(s.low), math.Log(s.high)
		if high-low < 1e-12 {
			low, high = low-1, high+1
		}
		more := room * (high - low)
		s = span{math.Exp(max(low-more, math.Log(smallest))), math.Exp(min(high+more, math.Log(largest)))}
	} else {
		if size := max(math.Abs(s.low), math.Abs(s.high)); s.high-s.low <= 1e-12*size {
			half := 0.1 * size
			if size == 0 {
				half = 1
			}
			s = span{s.low - half, s.high + half}
		}
		more := room * (s.high - s.low)
		s = span{s.low - more, s.high + more}
	}
	v := view{scale: scaleFor(a.Unit, s.low, s.high, a.Log), log: a.Log}
	v.low, v.high = v.shown(s.low), v.shown(s.high)
	v.label = v.labelled(a.Label, a.Unit)
	return v
}

// at returns the place of a value as a fraction of the axis.
func (v *view) at(value float64) float64 { return v.fraction(v.shown(value)) }

func (v *view) fraction(shown float64) float64 {
	if v.log {
		return (math.Log(shown) - math.Log(v.low)) / (math.Log(v.high) - math.Log(v.low))
	}
	return (shown - v.low) / (v.high - v.low)
}

func (v *view) mark(steps int) {
	if v.log {
		v.ticks = logTicks(v.low, v.high, steps)
	} else {
		v.ticks = linearTicks(v.low, v.high, steps)
	}
}

// markAcross marks a horizontal axis of that length: as many labels as stand
// clear of each other.
func (v *view) markAcross(face font.Face, length vg.Length) {
	for steps := max(2, int(length/42)); ; steps-- {
		v.mark(steps)
		clear, right := true, vg.Length(math.Inf(-1))
		for _, t := range v.ticks {
			if t.label == "" {
				continue
			}
			centre, half := vg.Length(v.fraction(t.at))*length, width(face, t.label)/2
			clear = clear && centre-half-8 >= right
			right = centre + half
		}
		if clear || steps <= 1 {
			return
		}
	}
}

// markUp marks a vertical axis of that length.
func (v *view) markUp(length vg.Length) { v.mark(max(2, int(length/26))) }

// widest returns the width of the widest label.
func (v *view) widest(face font.Face) vg.Length {
	var w vg.Length
	for _, t := range v.ticks {
		w = max(w, width(face, t.label))
	}
	return w
}
