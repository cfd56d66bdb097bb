package figure

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/vg"
)

// A shape tells sets of points apart in a grey copy.
type shape int

const (
	disc shape = iota
	square
	triangle
	diamond
	shapes // how many there are
)

// marker draws a filled shape with a thin white rim, so that neighbours and the
// curve below stay visible.
func (p *pen) marker(kind shape, colour color.RGBA, at vg.Point, radius vg.Length) {
	corners, turn, size := 24, 0.0, radius
	switch kind {
	case square:
		corners, turn, size = 4, math.Pi/4, 1.25*radius
	case triangle:
		corners, turn, size = 3, math.Pi/2, 1.45*radius
	case diamond:
		corners, turn, size = 4, 0, 1.4*radius
	}
	polygon := func(size vg.Length) []vg.Point {
		points := make([]vg.Point, corners)
		for i := range points {
			sin, cos := math.Sincos(turn + 2*math.Pi*float64(i)/float64(corners))
			points[i] = at.Add(vg.Point{X: size * vg.Length(cos), Y: size * vg.Length(sin)})
		}
		return points
	}
	p.area(white, polygon(size+0.5)...)
	p.area(colour, polygon(size)...)
}
