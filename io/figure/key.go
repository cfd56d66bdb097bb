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

const (
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
			k.entries = append(k.entries, entry{label: q.Label, line: -1, points: i})
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
		size := sampleWidth + sampleGap + width(face, e.label)
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
	for _, e := range pl.key.entries {
		at := start.Add(e.at)
		centre := at.Add(vg.Point{X: sampleWidth / 2, Y: middle * keySize})
		from, to := centre.Sub(vg.Point{X: sampleWidth / 2}), centre.Add(vg.Point{X: sampleWidth / 2})
		if e.line >= 0 {
			if len(pl.Lines[e.line].Low) > 0 {
				half := vg.Point{Y: 4}
				p.area(bandColour(e.line), from.Sub(half), to.Sub(half), to.Add(half), from.Add(half))
			}
			p.line(curve(e.line), from, to)
		} else {
			colour, shape := pl.pointStyle(e.points)
			if len(pl.Points[e.points].Error) > 0 {
				p.line(stroke{colour: colour, width: errorWidth}, centre.Sub(vg.Point{Y: 5}), centre.Add(vg.Point{Y: 5}))
			}
			p.marker(shape, colour, centre, 2.5)
		}
		p.text(face, at.Add(vg.Point{X: sampleWidth + sampleGap}), e.label, 0)
	}
}
