package figure

import (
	"image"
	"image/color"
	"math"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// A pen draws on the canvas of a format and hides what the formats do differently.
type pen struct {
	vg.Canvas
	outlines bool        // draw letters as shapes: PDF's letters lack µ and Greek
	upside   bool        // draw images upside down: the library's PDF turns them
	widths   []vg.Length // of the texts set as letters, in order
}

type stroke struct {
	colour color.RGBA
	width  vg.Length
	dashes []vg.Length
}

// line draws in stretches: the library's rasteriser takes a time that grows with
// the square of what one path covers. A stretch begins one segment back, so that
// the corner is drawn, with its dashes where they would have been.
func (p *pen) line(s stroke, points ...vg.Point) {
	const stretch = 300
	p.SetColor(s.colour)
	p.SetLineWidth(s.width)
	var length vg.Length // up to the stretch
	for from := 0; from+1 < len(points); from += stretch {
		to := min(from+stretch+2, len(points))
		p.SetLineDash(s.dashes, length)
		var path vg.Path
		path.Move(points[from])
		for i := from + 1; i < to; i++ {
			path.Line(points[i])
			if i <= from+stretch {
				step := points[i].Sub(points[i-1])
				length += vg.Length(math.Hypot(float64(step.X), float64(step.Y)))
			}
		}
		p.Stroke(path)
	}
}

func (p *pen) area(c color.RGBA, points ...vg.Point) {
	p.SetColor(c)
	var path vg.Path
	path.Move(points[0])
	for _, q := range points[1:] {
		path.Line(q)
	}
	path.Close()
	p.Fill(path)
}

func (p *pen) frame(s stroke, r vg.Rectangle) {
	p.SetColor(s.colour)
	p.SetLineWidth(s.width)
	p.SetLineDash(nil, 0)
	p.Stroke(r.Path())
}

// text sets a text on the line through at; align 0, ½, 1 puts its left end, its
// middle or its right end there.
func (p *pen) text(face font.Face, at vg.Point, text string, align float64) {
	at.X -= vg.Length(align) * width(face, text)
	p.SetColor(black)
	for _, r := range runs(face, text) {
		place := at.Add(vg.Point{Y: r.rise})
		if p.outlines {
			p.Push()
			p.Translate(place)
			p.Fill(outline(r.face, r.text))
			p.Pop()
		} else {
			p.FillString(r.face, place, r.text)
			p.widths = append(p.widths, r.face.Width(r.text))
		}
		at.X += r.face.Width(r.text)
	}
}

// upwards sets a text that reads from below to above.
func (p *pen) upwards(face font.Face, at vg.Point, text string, align float64) {
	p.Push()
	p.Translate(at)
	p.Rotate(math.Pi / 2)
	p.text(face, vg.Point{}, text, align)
	p.Pop()
}

// picture fills the rectangle with an image.
func (p *pen) picture(r vg.Rectangle, img *image.RGBA) {
	if p.upside {
		turned := image.NewRGBA(img.Rect)
		for y := range img.Rect.Dy() {
			copy(turned.Pix[y*turned.Stride:], img.Pix[(img.Rect.Dy()-1-y)*img.Stride:][:img.Stride])
		}
		img = turned
	}
	p.DrawImage(r, img)
}
