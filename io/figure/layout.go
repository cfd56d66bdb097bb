package figure

import (
	"fmt"
	"math"

	"gonum.org/v1/plot/vg"
)

// Distances in points.
const (
	margin      = 8  // round the figure
	tickLength  = 4  // of labelled marks, half for the others
	tickGap     = 3  // between a mark and its label
	labelGap    = 6  // between the numbers and the label of the axis
	lineHeight  = 13 // of labels, legend and title
	panelGap    = 10 // between panels
	barGap      = 12 // between the frame and the colour bar
	barWidth    = 11
	leastHeight = 30 // of a frame
	leastWidth  = 60
)

// A plane is a panel with its place on the page.
type plane struct {
	*Panel
	x, y, value view
	frame       vg.Rectangle
	bottom      bool // numbers and label of x stand below
	key         key
	xLines      []string // labels, wrapped
	yLines      []string
	valueLines  []string
}

// draw lays the figure out and draws it.
func (f *Figure) draw(p *pen, w, h vg.Length) error {
	planes := f.planes()
	title := wrapped(bold(titleSize), f.Title, w-2*margin)
	left, right := vg.Length(60), vg.Length(20)
	// Widths follow from the numbers along y, these from the heights, these from
	// the lines that labels and legends take, these from the widths: three
	// rounds settle it.
	for range 3 {
		if w-left-right < leastWidth {
			return fmt.Errorf("figure: %.3g cm are too narrow for the panels; make it wider", float64(w/vg.Centimeter))
		}
		top := h - margin
		if len(title) > 0 {
			top -= vg.Length(len(title))*lineHeight + 4
		}
		if err := place(planes, left, w-right, top, h); err != nil {
			return err
		}
		left, right = sides(planes)
	}
	p.area(white, vg.Point{}, vg.Point{X: w}, vg.Point{X: w, Y: h}, vg.Point{Y: h})
	for i, line := range title {
		p.text(bold(titleSize), vg.Point{X: w / 2, Y: h - margin - titleSize*0.8 - vg.Length(i)*lineHeight}, line, 0.5)
	}
	for i := range planes {
		planes[i].draw(p)
	}
	return nil
}

// planes chooses ranges and scales.
func (f *Figure) planes() []plane {
	planes := make([]plane, len(f.Panels))
	for from := 0; from < len(planes); {
		// Panels from…to−1 share their x axis.
		to := from
		across, room := emptySpan(), 0.0
		for ; to < len(planes) && f.Panels[to].X == f.Panels[from].X; to++ {
			pl := &planes[to]
			pl.Panel = &f.Panels[to]
			x, y, value := pl.spans()
			across.unite(x)
			yRoom := 0.06
			if pl.Map != nil {
				yRoom = 0
				pl.value = viewOf(pl.Map.Value, value, 0)
			} else {
				room = 0.02
			}
			pl.y = viewOf(pl.Y, y, yRoom)
			pl.key = pl.entries()
		}
		for i := from; i < to; i++ {
			planes[i].x = viewOf(f.Panels[i].X, across, room)
			planes[i].bottom = i == to-1
		}
		from = to
	}
	return planes
}

// spans returns what the axes have to cover.
func (p *Panel) spans() (x, y, value span) {
	x, y, value = emptySpan(), emptySpan(), emptySpan()
	meet := func(u, v float64) {
		if p.X.usable(u) && p.Y.usable(v) {
			x.meet(u)
			y.meet(v)
		}
	}
	for _, l := range p.Lines {
		for i, u := range l.X {
			meet(u, l.Y[i])
			if len(l.Low) > 0 {
				meet(u, l.Low[i])
				meet(u, l.High[i])
			}
		}
	}
	for _, q := range p.Points {
		for i, u := range q.X {
			meet(u, q.Y[i])
			if len(q.Error) > 0 && p.Y.usable(q.Y[i]) {
				meet(u, q.Y[i]-math.Abs(q.Error[i]))
				meet(u, q.Y[i]+math.Abs(q.Error[i]))
			}
		}
	}
	if p.Map != nil {
		columns, rows := edges(p.Map.X, p.X.Log), edges(p.Map.Y, p.Y.Log)
		x.unite(span{columns[0], columns[len(columns)-1]})
		y.unite(span{rows[0], rows[len(rows)-1]})
		for _, column := range p.Map.Values {
			for _, v := range column {
				if p.Map.Value.usable(v) {
					value.meet(v)
				}
			}
		}
	}
	for _, v := range p.Horizontals {
		if p.Y.usable(v) && math.Abs(v) <= largest {
			y.meet(v)
		}
	}
	for _, v := range p.Verticals {
		if p.X.usable(v) && math.Abs(v) <= largest {
			x.meet(v)
		}
	}
	return x, y, value
}

// place gives every plane its frame, between left and right and below top.
func place(planes []plane, left, right, top, h vg.Length) error {
	ticks, labels := letters(tickSize), letters(labelSize)
	shares, free := 0.0, top-margin-panelGap*vg.Length(len(planes)-1)
	for i := range planes {
		pl := &planes[i]
		pl.x.markAcross(ticks, right-left)
		pl.xLines = nil
		if pl.bottom {
			pl.xLines = wrapped(labels, pl.x.label, right-left)
		}
		pl.key.arrange(right - left)
		shares += pl.share()
		free -= pl.key.height() + pl.below()
	}
	for i := range planes {
		pl := &planes[i]
		height := free * vg.Length(pl.share()/shares)
		if height < leastHeight {
			return fmt.Errorf("figure: %.3g cm are too low for %d panels with their labels; make it higher or draw less",
				float64(h/vg.Centimeter), len(planes))
		}
		top -= pl.key.height()
		pl.frame = vg.Rectangle{Min: vg.Point{X: left, Y: top - height}, Max: vg.Point{X: right, Y: top}}
		top -= height + pl.below() + panelGap
		pl.y.markUp(height)
		pl.yLines = wrapped(labels, pl.y.label, height+lineHeight)
		if pl.Map != nil {
			pl.value.markUp(height)
			pl.valueLines = wrapped(labels, pl.value.label, height+lineHeight)
		}
	}
	return nil
}

// below returns the height of what stands under the frame.
func (pl *plane) below() vg.Length {
	if !pl.bottom {
		return 0
	}
	return tickLength + tickGap + tickSize*0.75 + labelGap + vg.Length(len(pl.xLines))*lineHeight
}

// sides returns the room that numbers and labels of all planes need.
func sides(planes []plane) (left, right vg.Length) {
	ticks := letters(tickSize)
	for i := range planes {
		pl := &planes[i]
		left = max(left, margin+vg.Length(len(pl.yLines))*lineHeight+labelGap+pl.y.widest(ticks)+tickGap+tickLength)
		right = max(right, margin)
		if pl.Map != nil {
			right = max(right, barGap+barWidth+tickLength+tickGap+pl.value.widest(ticks)+labelGap+
				vg.Length(len(pl.valueLines))*lineHeight+margin)
		}
		for _, t := range pl.x.ticks {
			if t.label != "" && pl.bottom {
				over := width(ticks, t.label)/2 - vg.Length(1-pl.x.fraction(t.at))*(pl.frame.Max.X-pl.frame.Min.X)
				right = max(right, over+margin/2)
			}
		}
	}
	return left, right
}
