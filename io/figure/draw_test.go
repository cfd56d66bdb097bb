package figure

import (
	"image"
	"image/color"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/recorder"
)

func unitPlane(p *Panel) *plane {
	return &plane{
		Panel: p,
		x:     viewOf(p.X, span{0, 1}, 0), y: viewOf(p.Y, span{0, 1}, 0),
		frame: vg.Rectangle{Max: vg.Point{X: 100, Y: 100}},
	}
}

func TestGaps(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	pl := unitPlane(&Panel{})
	pieces := pl.pieces([]float64{0, 0.1, 0.2, 0.3, nan, 0.5, 0.6}, []float64{1, 1, nan, 1, 1, 0.5, inf})
	require.Len(t, pieces, 3)
	assert.Equal(t, []vg.Point{{X: 0, Y: 100}, {X: 10, Y: 100}}, pieces[0])
	assert.Len(t, pieces[1], 1)
	assert.Equal(t, []vg.Point{{X: 50, Y: 50}}, pieces[2])
}

// TestThinned: no column of dots loses its lowest or highest value.
func TestThinned(t *testing.T) {
	var points []vg.Point
	for i := range 200000 {
		points = append(points, vg.Point{X: vg.Length(i) * 400 / 200000, Y: vg.Length(math.Sin(float64(i)))})
	}
	points[123456].Y = 7
	points[77777].Y = -7
	few := thinned(points)
	assert.Less(t, len(few), 4*400*5)
	low, high := vg.Length(0), vg.Length(0)
	for i, p := range few {
		low, high = min(low, p.Y), max(high, p.Y)
		assert.True(t, i == 0 || p.X >= few[i-1].X)
	}
	assert.Equal(t, vg.Length(-7), low)
	assert.Equal(t, vg.Length(7), high)
	assert.Equal(t, points[0], few[0])
	assert.Equal(t, points[len(points)-1], few[len(few)-1])
	points[5].X = 300
	assert.Len(t, thinned(points), len(points), "a curve that turns back is kept whole")
	assert.Equal(t, points[:10], thinned(points[:10]))
}

// TestLineInStretches: a long line is drawn whole, and its dashes run on.
func TestLineInStretches(t *testing.T) {
	var points []vg.Point
	for i := range 1000 {
		points = append(points, vg.Point{X: vg.Length(i)})
	}
	var record recorder.Canvas
	p := &pen{Canvas: &record}
	p.line(stroke{dashes: []vg.Length{3, 3}}, points...)
	covered, offset := vg.Length(0), vg.Length(0)
	for _, action := range record.Actions {
		switch a := action.(type) {
		case *recorder.SetLineDash:
			offset = a.Offsets
		case *recorder.Stroke:
			first, last := a.Path[0].Pos.X, a.Path[len(a.Path)-1].Pos.X
			assert.LessOrEqual(t, first, covered)
			assert.Equal(t, first, offset)
			covered = last
		}
	}
	assert.Equal(t, vg.Length(999), covered)
	record.Reset()
	p.line(stroke{}, points[:1]...)
	for _, action := range record.Actions {
		_, drawn := action.(*recorder.Stroke)
		assert.False(t, drawn)
	}
}

// TestPicture: the library's PDF turns images upside down, as seen in its
// output; so the picture is turned beforehand there and only there.
func TestPicture(t *testing.T) {
	img := image.NewRGBA(image.Rect(0, 0, 1, 2))
	img.SetRGBA(0, 0, color.RGBA{1, 2, 3, 255})
	for _, upside := range []bool{false, true} {
		var record recorder.Canvas
		p := &pen{Canvas: &record, upside: upside}
		p.picture(vg.Rectangle{Max: vg.Point{X: 1, Y: 2}}, img)
		drawn := record.Actions[0].(*recorder.DrawImage).Image.(*image.RGBA)
		row := 0
		if upside {
			row = 1
		}
		assert.Equal(t, color.RGBA{1, 2, 3, 255}, drawn.RGBAAt(0, row))
		assert.Equal(t, color.RGBA{}, drawn.RGBAAt(0, 1-row))
	}
}

func TestEdges(t *testing.T) {
	assert.Equal(t, []float64{-0.5, 0.5, 2, 4}, edges([]float64{0, 1, 3}, false))
	assert.InDeltaSlice(t, []float64{math.Sqrt(0.1), math.Sqrt(10), math.Sqrt(1000)}, edges([]float64{1, 10}, true), 1e-12)
	assert.Equal(t, []float64{1, 3}, edges([]float64{2}, false))
	assert.Equal(t, []float64{-0.5, 0.5}, edges([]float64{0}, false))
}

func TestCells(t *testing.T) {
	v := viewOf(Axis{}, span{-0.5, 3.5}, 0)
	assert.Equal(t, []stretch{{0, 0}, {0, 0}, {1, 1}, {1, 1}, {2, 2}, {2, 2}, {3, 3}, {3, 3}},
		cells([]float64{0, 1, 2, 3}, &v, 8), "two dots for each cell")
	assert.Equal(t, []stretch{{0, 1}, {2, 3}}, cells([]float64{0, 1, 2, 3}, &v, 2), "two cells for each dot")
	v = viewOf(Axis{}, span{-2.5, 3.5}, 0)
	assert.Equal(t, []stretch{{0, -1}, {0, -1}, {0, 0}, {1, 1}, {0, -1}, {0, -1}},
		cells([]float64{0, 1}, &v, 6), "nothing beyond the map")
}
