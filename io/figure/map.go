package figure

import (
	"image"
	"math"

	"gonum.org/v1/plot/vg"
)

// edges returns the limits of cells around these places: halfway to the
// neighbours, in the logarithm where the axis is logarithmic.
func edges(places []float64, log bool) []float64 {
	n := len(places)
	at := make([]float64, n)
	for i, v := range places {
		at[i] = v
		if log {
			at[i] = math.Log(v)
		}
	}
	out := make([]float64, n+1)
	for i := 1; i < n; i++ {
		out[i] = at[i-1] + (at[i]-at[i-1])/2
	}
	if n == 1 {
		half := 0.5
		if at[0] != 0 && !log {
			half = math.Abs(at[0]) / 2
		}
		out[0], out[1] = at[0]-half, at[0]+half
	} else {
		out[0] = at[0] - (out[1] - at[0])
		out[n] = at[n-1] + (at[n-1] - out[n-1])
	}
	if log {
		for i := range out {
			out[i] = math.Exp(out[i])
		}
	}
	return out
}

// A stretch is a range of cells, both ends included; first > last is none.
type stretch struct{ first, last int }

// cells says for each of n dots along an axis which cells it shows: all those
// whose middle falls on the dot, or else the one in which it lies.
func cells(places []float64, v *view, n int) []stretch {
	limits := edges(places, v.log)
	fractions := make([]float64, len(limits))
	for i, limit := range limits {
		fractions[i] = v.at(limit)
	}
	out := make([]stretch, n)
	begin, inside := 0, 0
	for k := range out {
		from, to := float64(k)/float64(n), float64(k+1)/float64(n)
		for begin < len(places) && v.at(places[begin]) < from {
			begin++
		}
		end := begin
		for end < len(places) && v.at(places[end]) < to {
			end++
		}
		out[k] = stretch{begin, end - 1}
		if begin < end {
			continue
		}
		centre := (from + to) / 2
		for inside < len(places) && fractions[inside+1] <= centre {
			inside++
		}
		out[k] = stretch{inside, inside}
		if inside == len(places) || fractions[inside] > centre {
			out[k] = stretch{0, -1} // beyond the map, where another panel or a curve widens the axis
		}
	}
	return out
}

// drawMap paints the cells and the colour bar.
func (pl *plane) drawMap(p *pen) {
	size := pl.frame.Size()
	img := image.NewRGBA(image.Rect(0, 0, dots(size.X), dots(size.Y)))
	columns := cells(pl.Map.X, &pl.x, img.Rect.Dx())
	rows := cells(pl.Map.Y, &pl.y, img.Rect.Dy())
	for k, column := range columns {
		for j, row := range rows {
			if column.first > column.last || row.first > row.last {
				continue
			}
			sum, count := 0.0, 0.0
			for i := column.first; i <= column.last; i++ {
				for _, v := range pl.Map.Values[i][row.first : row.last+1] {
					if pl.Map.Value.usable(v) {
						sum += pl.value.at(v)
						count++
					}
				}
			}
			colour := white
			if count > 0 {
				colour = rampColour(sum / count)
			}
			img.SetRGBA(k, img.Rect.Dy()-1-j, colour)
		}
	}
	p.picture(pl.frame, img)
	pl.drawBar(p)
}

func dots(l vg.Length) int { return max(1, int(math.Round(l.Dots(resolution)))) }

// drawBar draws the colour bar with its numbers and label.
func (pl *plane) drawBar(p *pen) {
	bar := vg.Rectangle{
		Min: vg.Point{X: pl.frame.Max.X + barGap, Y: pl.frame.Min.Y},
		Max: vg.Point{X: pl.frame.Max.X + barGap + barWidth, Y: pl.frame.Max.Y},
	}
	img := image.NewRGBA(image.Rect(0, 0, dots(barWidth), dots(bar.Size().Y)))
	for j := range img.Rect.Dy() {
		colour := rampColour(1 - (float64(j)+0.5)/float64(img.Rect.Dy()))
		for i := range img.Rect.Dx() {
			img.SetRGBA(i, j, colour)
		}
	}
	p.picture(bar, img)
	ticks, labels := letters(tickSize), letters(labelSize)
	ink := stroke{colour: black, width: frameWidth}
	p.frame(ink, bar)
	for _, t := range pl.value.ticks {
		at := vg.Point{X: bar.Max.X, Y: bar.Min.Y + vg.Length(pl.value.fraction(t.at))*bar.Size().Y}
		p.line(ink, at, at.Add(vg.Point{X: t.length()}))
		p.text(ticks, at.Add(vg.Point{X: tickLength + tickGap, Y: -middle * tickSize}), t.label, 0)
	}
	for i, line := range pl.valueLines {
		x := bar.Max.X + tickLength + tickGap + pl.value.widest(ticks) + labelGap + labelSize*0.85 + vg.Length(i)*lineHeight
		p.upwards(labels, vg.Point{X: x, Y: (bar.Min.Y + bar.Max.Y) / 2}, line, 0.5)
	}
}
