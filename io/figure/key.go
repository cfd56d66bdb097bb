package figure

import "gonum.org/v1/plot/vg"

// A key is the legend of a panel: entries in rows above the frame, where they
// hide nothing.
type key struct {
	entries []entry
	rows    int
}

type entry struct {
	label  string
	line   int // number of the line it stands for, or −1
	points int // number of the set of points, or −1
	at     vg.Point
}

// sample returns the width of the sample in front of the label.
func (e *entry) sample() vg.Length {
	if e.line < 0 {
		return markerWidth
	}
	return sampleWidth
}

const (
	markerWidth = 10
	sampleWidth = 26
	sampleGap   = 5
	entryGap    = 16
)

// entries are there where there is more than one to tell apart.
func (p *Panel) entries() key {
	var k key
	for i, l := range p.Lines {
		if l.Label != "" {
			k.entries = append(k.entries, entry{label: l.Label, line: i, points: -1})
		}
	}
	for i, q := range p.Points {
		if q.Label != "" {
			e := entry{label: q.Label, line: -1, points: i}
			if len(p.Points) > 1 && i < len(p.Lines) && p.Lines[i].Label == "" {
				e.line = i // their curve has their colour
			}
			k.entries = append(k.entries, e)
		}
	}
	if len(k.entries) < 2 {
		return key{}
	}
	return k
}

// arrange puts the entries in rows of that width; places are counted from the
// left end of the line of the uppermost row.
func (k *key) arrange(room vg.Length) {
	face := letters(keySize)
	k.rows = 0
	var x, y vg.Length
	for i := range k.entries {
		e := &k.entries[i]
		e.label = cut(face, e.label, room-sampleWidth-sampleGap)
		size := e.sample() + sampleGap + width(face, e.label)
		if i > 0 && x+size > room {
			x, y = 0, y-lineHeight
		}
		e.at = vg.Point{X: x, Y: y}
		x += size + entryGap
		k.rows = 1 - int(y/lineHeight)
	}
}

func (k *key) height() vg.Length {
	if k.rows == 0 {
		return 0
	}
	return vg.Length(k.rows)*lineHeight + 4
}

func (pl *plane) drawKey(p *pen) {
	face := letters(keySize)
	start := vg.Point{X: pl.frame.Min.X, Y: pl.frame.Max.Y + pl.key.height() - lineHeight + 2}
	for i := range pl.key.entries {
		e := &pl.key.entries[i]
		at := start.Add(e.at)
		half := vg.Point{X: e.sample() / 2}
		centre := at.Add(half).Add(vg.Point{Y: middle * keySize})
		from, to := centre.Sub(half), centre.Add(half)
		if e.line >= 0 {
			if len(pl.Lines[e.line].Low) > 0 {
				up := vg.Point{Y: 4}
				p.area(bandColour(e.line), from.Sub(up), to.Sub(up), to.Add(up), from.Add(up))
			}
			p.line(curve(e.line), from, to)
		}
		if e.points >= 0 {
			colour, shape := pl.pointStyle(e.points)
			if len(pl.Points[e.points].Error) > 0 {
				p.line(stroke{colour: colour, width: errorWidth}, centre.Sub(vg.Point{Y: 5}), centre.Add(vg.Point{Y: 5}))
			}
			p.marker(shape, colour, centre, 2.5)
		}
		p.text(face, at.Add(vg.Point{X: e.sample() + sampleGap}), e.label, 0)
	}
}
