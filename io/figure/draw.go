package figure

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/vg"
)

const (
	curveWidth = 1.4
	errorWidth = 0.8
	frameWidth = 0.6
)

func curve(i int) stroke {
	return stroke{colour: curveColour(i), width: curveWidth, dashes: curveDash(i)}
}

func (pl *plane) draw(p *pen) {
	if pl.Map != nil {
		pl.drawMap(p)
	}
	for i, l := range pl.Lines {
		pl.drawBand(p, i, l)
	}
	thin := stroke{colour: grey, width: frameWidth}
	for _, v := range pl.Horizontals {
		if pl.Y.usable(v) && math.Abs(v) <= largest {
			y := pl.place(0, pl.y.at(v)).Y
			p.line(thin, vg.Point{X: pl.frame.Min.X, Y: y}, vg.Point{X: pl.frame.Max.X, Y: y})
		}
	}
	for _, v := range pl.Verticals {
		if pl.X.usable(v) && math.Abs(v) <= largest {
			x := pl.place(pl.x.at(v), 0).X
			p.line(thin, vg.Point{X: x, Y: pl.frame.Min.Y}, vg.Point{X: x, Y: pl.frame.Max.Y})
		}
	}
	for i, l := range pl.Lines {
		for _, piece := range pl.pieces(l.X, l.Y) {
			if len(piece) == 1 {
				p.marker(disc, curveColour(i), piece[0], 1.8)
			}
			p.line(curve(i), thinned(piece)...)
		}
	}
	for i := range pl.Points {
		pl.drawPoints(p, i)
	}
	pl.drawAxes(p)
	pl.drawKey(p)
}

// place returns the point at fractions of the axes.
func (pl *plane) place(x, y float64) vg.Point {
	size := pl.frame.Size()
	return pl.frame.Min.Add(vg.Point{X: vg.Length(x) * size.X, Y: vg.Length(y) * size.Y})
}

// pieces are the stretches of a curve between its gaps.
func (pl *plane) pieces(x, y []float64) [][]vg.Point {
	var out [][]vg.Point
	open := false
	for i := range x {
		if !pl.X.usable(x[i]) || !pl.Y.usable(y[i]) {
			open = false
			continue
		}
		if !open {
			out = append(out, nil)
			open = true
		}
		last := &out[len(out)-1]
		*last = append(*last, pl.place(pl.x.at(x[i]), pl.y.at(y[i])))
	}
	return out
}

// thinned leaves out what no eye can see: of many points within the width of a
// dot it keeps the first, the lowest, the highest and the last.
func thinned(points []vg.Point) []vg.Point {
	const few, dot = 4000, 0.24
	if len(points) <= few {
		return points
	}
	for i := 1; i < len(points); i++ {
		if points[i].X < points[i-1].X {
			return points
		}
	}
	var out []vg.Point
	for from := 0; from < len(points); {
		to, low, high := from, from, from
		for ; to < len(points) && points[to].X < points[from].X+dot; to++ {
			if points[to].Y < points[low].Y {
				low = to
			}
			if points[to].Y > points[high].Y {
				high = to
			}
		}
		last := from - 1
		for _, i := range []int{from, min(low, high), max(low, high), to - 1} {
			if i > last {
				out = append(out, points[i])
				last = i
			}
		}
		from = to
	}
	return out
}

// onY returns the fraction of the axis for the end of a bar or band, which may
// lie below all that a logarithmic axis can show.
func (pl *plane) onY(v float64) float64 {
	if pl.y.log && v <= smallest {
		return 0
	}
	return min(max(pl.y.at(v), 0), 1)
}

func (pl *plane) drawBand(p *pen, i int, l Line) {
	var lower, upper []vg.Point
	flush := func() {
		if len(lower) > 1 {
			low, high := thinned(lower), thinned(upper)
			outline := append([]vg.Point{}, low...)
			for k := len(high) - 1; k >= 0; k-- {
				outline = append(outline, high[k])
			}
			p.area(bandColour(i), outline...)
			edge := stroke{colour: bandEdge(i), width: frameWidth}
			p.line(edge, low...)
			p.line(edge, high...)
		}
		lower, upper = nil, nil
	}
	for k := range l.Low {
		// A band that ends below a logarithmic axis is drawn down to the frame;
		// one that begins there is not seen.
		finite := !math.IsInf(l.Low[k], 0) && !math.IsInf(l.High[k], 0)
		if !pl.X.usable(l.X[k]) || !finite || !pl.Y.usable(max(l.Low[k], l.High[k])) {
			flush()
			continue
		}
		x := pl.x.at(l.X[k])
		lower = append(lower, pl.place(x, pl.onY(l.Low[k])))
		upper = append(upper, pl.place(x, pl.onY(l.High[k])))
	}
	flush()
}

// pointStyle returns colour and shape of a set of points.
func (pl *plane) pointStyle(i int) (color.RGBA, shape) {
	if len(pl.Points) == 1 {
		return black, disc
	}
	return curveColour(i), shape(i % int(shapes))
}

func (pl *plane) drawPoints(p *pen, i int) {
	q := pl.Points[i]
	colour, kind := pl.pointStyle(i)
	radius := vg.Length(2.5)
	switch {
	case len(q.X) > 600:
		radius = 1.1
	case len(q.X) > 150:
		radius = 1.7
	}
	bar := stroke{colour: colour, width: errorWidth}
	for k := range q.X {
		if !pl.X.usable(q.X[k]) || !pl.Y.usable(q.Y[k]) {
			continue
		}
		x := pl.x.at(q.X[k])
		at := pl.place(x, pl.y.at(q.Y[k]))
		if len(q.Error) > 0 && !math.IsNaN(q.Error[k]) && !math.IsInf(q.Error[k], 0) {
			low := pl.place(x, pl.onY(q.Y[k]-math.Abs(q.Error[k])))
			high := pl.place(x, pl.onY(q.Y[k]+math.Abs(q.Error[k])))
			cap := vg.Point{X: min(radius, 2)}
			p.line(bar, low, high)
			p.line(bar, low.Sub(cap), low.Add(cap))
			p.line(bar, high.Sub(cap), high.Add(cap))
		}
		p.marker(kind, colour, at, radius)
	}
}

// drawAxes draws the frame with its marks, numbers and labels.
func (pl *plane) drawAxes(p *pen) {
	ticks, labels := letters(tickSize), letters(labelSize)
	ink := stroke{colour: black, width: frameWidth}
	p.frame(ink, pl.frame)
	low, high := pl.frame.Min, pl.frame.Max
	for _, t := range pl.x.ticks {
		at := pl.place(pl.x.fraction(t.at), 0)
		p.line(ink, at, at.Sub(vg.Point{Y: t.length()}))
		if pl.bottom {
			p.text(ticks, at.Sub(vg.Point{Y: tickLength + tickGap + tickSize*0.75}), t.label, 0.5)
		}
	}
	for _, t := range pl.y.ticks {
		at := pl.place(0, pl.y.fraction(t.at))
		p.line(ink, at, at.Sub(vg.Point{X: t.length()}))
		p.text(ticks, at.Sub(vg.Point{X: tickLength + tickGap, Y: middle * tickSize}), t.label, 1)
	}
	for i, line := range pl.xLines {
		y := low.Y - tickLength - tickGap - tickSize*0.75 - labelGap - labelSize*0.75 - vg.Length(i)*lineHeight
		p.text(labels, vg.Point{X: (low.X + high.X) / 2, Y: y}, line, 0.5)
	}
	for i, line := range pl.yLines {
		x := low.X - tickLength - tickGap - pl.y.widest(ticks) - labelGap -
			vg.Length(len(pl.yLines)-1-i)*lineHeight - labelSize*0.15
		p.upwards(labels, vg.Point{X: x, Y: (low.Y + high.Y) / 2}, line, 0.5)
	}
}

func (t tick) length() vg.Length {
	if t.label == "" {
		return tickLength / 2
	}
	return tickLength
}
