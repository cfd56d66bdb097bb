package figure_test

import (
	"bytes"
	"encoding/base64"
	"encoding/binary"
	"encoding/xml"
	"errors"
	"fmt"
	"image/png"
	"io"
	"math"
	"regexp"
	"strings"
	"testing"

	"rhotrace/io/figure"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func written(t testing.TB, f *figure.Figure, format string) []byte {
	t.Helper()
	var out bytes.Buffer
	require.NoError(t, f.Write(&out, format))
	return out.Bytes()
}

// texts are the texts of an SVG, in order; an error if it is not XML.
func texts(t testing.TB, svg []byte) (out []string) {
	t.Helper()
	in := xml.NewDecoder(bytes.NewReader(svg))
	inside := false
	for {
		token, err := in.Token()
		if errors.Is(err, io.EOF) {
			return out
		}
		require.NoError(t, err)
		switch e := token.(type) {
		case xml.StartElement:
			if inside = e.Name.Local == "text"; inside {
				out = append(out, "")
			}
		case xml.CharData:
			if inside {
				out[len(out)-1] += string(e)
			}
		case xml.EndElement:
			inside = false
		}
	}
}

func sequence(n int, f func(i int) float64) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = f(i)
	}
	return out
}

// measured is a curve with a band, an invented trace and its residuals.
func measured() *figure.Figure {
	x := sequence(101, func(i int) float64 { return 1e-4 * float64(i) })
	y := sequence(101, func(i int) float64 { return 0.5 + 0.4*math.Cos(float64(i)/5) })
	at := sequence(20, func(i int) float64 { return 5e-4 * float64(i) })
	data := sequence(20, func(i int) float64 { return y[5*i] + 0.03*math.Sin(float64(7*i)) })
	same := func(v float64) []float64 { return sequence(20, func(int) float64 { return v }) }
	time := figure.Axis{Label: "Dark time", Unit: "s"}
	return &figure.Figure{
		Title: "Fringe",
		Panels: []figure.Panel{
			{X: time, Y: figure.Axis{Label: "Bright fraction", Unit: "1"},
				Lines: []figure.Line{{Label: "prediction", X: x, Y: y,
					Low:  sequence(101, func(i int) float64 { return y[i] - 0.03 }),
					High: sequence(101, func(i int) float64 { return y[i] + 0.03 })}},
				Points: []figure.Points{{Label: "invented trace", X: at, Y: data, Error: same(0.03)}}},
			{X: time, Y: figure.Axis{Label: "Residual (s.d.)"}, Share: 0.35, Horizontals: []float64{0},
				Points: []figure.Points{{X: at, Y: sequence(20, func(i int) float64 { return math.Sin(float64(7 * i)) }), Error: same(1)}}},
		},
	}
}

func TestSVG(t *testing.T) {
	svg := written(t, measured(), "svg")
	got := texts(t, svg)
	for _, want := range []string{"Fringe", "Bright fraction", "Residual (s.d.)", "Dark time (ms)", "prediction", "invented trace", "0.8", "−2"} {
		assert.Contains(t, got, want)
	}
	count := 0
	for _, text := range got {
		if text == "Dark time (ms)" {
			count++
		}
	}
	assert.Equal(t, 1, count, "panels that share an axis label it once")
	// 16 cm by 10 cm times 1.35, in points of 1/72 inch.
	assert.Contains(t, string(svg), `width="453.54pt" height="382.68pt"`)
	assert.Contains(t, string(svg), "font-family:Liberation Sans,Arial,Helvetica,sans-serif")
	for _, size := range regexp.MustCompile(`font-size:([0-9.]+)px`).FindAllStringSubmatch(string(svg), -1) {
		assert.Contains(t, []string{"10", "11"}, size[1], "letters to be read on paper")
	}
	lengths := strings.Count(string(svg), "textLength=")
	assert.Equal(t, len(got), lengths)
	assert.NotContains(t, string(svg), "NaN")
}

func TestPNG(t *testing.T) {
	data := written(t, measured(), "png")
	img, err := png.Decode(bytes.NewReader(data)) // checks every chunk's sum
	require.NoError(t, err)
	assert.Equal(t, 1890, img.Bounds().Dx(), "16 cm at 300 dots per inch")
	assert.InDelta(t, 1594, img.Bounds().Dy(), 1)
	// W3C PNG specification, 11.3.5.3: pixels per metre, unit 1.
	at := bytes.Index(data, []byte("pHYs"))
	require.Equal(t, 8+25+4, at, "directly behind the header")
	assert.Equal(t, uint32(11811), binary.BigEndian.Uint32(data[at+4:]))
	assert.Equal(t, byte(1), data[at+12])

	small := measured()
	small.Width, small.Height = 8.6, 9
	img, err = png.Decode(bytes.NewReader(written(t, small, "png")))
	require.NoError(t, err)
	assert.InDelta(t, 8.6/2.54*300, img.Bounds().Dx(), 1)
	assert.InDelta(t, 9/2.54*300, img.Bounds().Dy(), 1)
}

func TestPDF(t *testing.T) {
	pdf := written(t, measured(), "pdf")
	assert.True(t, bytes.HasPrefix(pdf, []byte("%PDF-")))
	assert.Contains(t, string(pdf), "/MediaBox [0 0 453.54 382.68]")
	assert.NotContains(t, string(pdf), "/FontFile", "letters are shapes: the library's fonts garble µ")
}

func TestSameBytes(t *testing.T) {
	first, second := measured(), measured()
	first.Width, first.Height = 8, 8
	second.Width, second.Height = 8, 8
	for _, format := range []string{"svg", "png"} {
		assert.True(t, bytes.Equal(written(t, first, format), written(t, second, format)), format)
	}
}

// TestMap looks at the cells of a map inside its SVG.
func TestMap(t *testing.T) {
	f := &figure.Figure{Width: 9, Height: 6, Panels: []figure.Panel{{
		X: figure.Axis{Label: "Pulse", Unit: "s"}, Y: figure.Axis{Label: "Detuning", Unit: "Hz"},
		Map: &figure.Map{X: []float64{1e-6, 2e-6, 3e-6}, Y: []float64{-1e3, 1e3},
			Values: [][]float64{{0, 0.5}, {0.25, math.NaN()}, {0.75, 1}}, Value: figure.Axis{Label: "Population"}},
	}}}
	svg := written(t, f, "svg")
	got := texts(t, svg)
	for _, want := range []string{"Pulse (µs)", "Detuning (kHz)", "Population", "−1", "3"} {
		assert.Contains(t, got, want)
	}
	assert.NotContains(t, string(svg), "image/jpg")
	images := regexp.MustCompile(`data:image/png;base64,([^"]+)"`).FindAllSubmatch(svg, -1)
	require.Len(t, images, 2, "the map and the colour bar")
	raw, err := base64.StdEncoding.DecodeString(string(images[0][1]))
	require.NoError(t, err)
	img, err := png.Decode(bytes.NewReader(raw))
	require.NoError(t, err)
	// Six cells, the first row of the image uppermost.
	light := func(column, row int) uint32 {
		b := img.Bounds()
		r, g, blue, _ := img.At((2*column+1)*b.Dx()/6, (2*row+1)*b.Dy()/4).RGBA()
		return r + g + blue
	}
	assert.Equal(t, uint32(3*0xffff), light(1, 0), "no value: white")
	order := []uint32{light(0, 1), light(1, 1), light(0, 0), light(2, 1), light(2, 0)}
	assert.IsIncreasing(t, order)

	for _, format := range figure.Formats {
		written(t, f, format)
	}
}

// TestOdd: whatever numbers come, a picture without nonsense in it.
func TestOdd(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	line := func(x, y []float64) figure.Panel { return figure.Panel{Lines: []figure.Line{{X: x, Y: y}}} }
	log := func(x, y []float64) figure.Panel {
		p := line(x, y)
		p.X.Log, p.Y.Log = true, true
		return p
	}
	for name, panel := range map[string]figure.Panel{
		"one point":        line([]float64{3}, []float64{4}),
		"one zero":         line([]float64{0}, []float64{0}),
		"constant":         line([]float64{0, 1, 2}, []float64{1, 1, 1}),
		"rounding":         line([]float64{0, 1, 2}, []float64{1, 1 + 2e-16, 1 - 1e-16}),
		"gaps":             line([]float64{0, nan, 2, 3, 4}, []float64{1, 2, inf, 4, 5}),
		"huge":             line([]float64{0, 1}, []float64{-1e300, 1e300}),
		"tiny":             line([]float64{0, 5e-324}, []float64{0, 1e-320}),
		"huge and tiny":    line([]float64{1e-300, 1e300}, []float64{1e-100, 1e100}),
		"same place":       line([]float64{1, 1, 1}, []float64{1, 2, 3}),
		"log":              log([]float64{1e-9, 1e9}, []float64{1e-200, 1e200}),
		"log one":          log([]float64{5}, []float64{7}),
		"log with zero":    log([]float64{0, 1, 10}, []float64{1, -1, 3}),
		"log narrow":       log([]float64{2, 2.1}, []float64{9.99, 10.01}),
		"log extremes":     log([]float64{1e-289, 1e300}, []float64{1, 2}),
		"one cell":         {Map: &figure.Map{X: []float64{1}, Y: []float64{1}, Values: [][]float64{{2}}}},
		"even map":         {Map: &figure.Map{X: []float64{1, 2}, Y: []float64{1}, Values: [][]float64{{2}, {2}}}},
		"error bars":       {Points: []figure.Points{{X: []float64{1, 2, 3}, Y: []float64{1, 2, 3}, Error: []float64{nan, inf, -1}}}},
		"log bars":         {Y: figure.Axis{Log: true}, Points: []figure.Points{{X: []float64{1, 2}, Y: []float64{1, 2}, Error: []float64{5, 1}}}},
		"band with a hole": {Lines: []figure.Line{{X: []float64{1, 2, 3, 4}, Y: []float64{1, 1, 1, 1}, Low: []float64{0, nan, 0, 0}, High: []float64{2, 2, 2, 2}}}},
		"long words":       {X: figure.Axis{Label: strings.Repeat("w", 300)}, Y: figure.Axis{Label: strings.Repeat("long label ", 9)}, Lines: []figure.Line{{Label: strings.Repeat("i", 900), X: []float64{1, 2}, Y: []float64{1, 2}}, {Label: "<&>", X: []float64{1, 2}, Y: []float64{1, 2}}}},
	} {
		t.Run(name, func(t *testing.T) {
			f := &figure.Figure{Width: 9, Height: 8, Panels: []figure.Panel{panel}}
			svg := written(t, f, "svg")
			texts(t, svg)
			assert.NotRegexp(t, "NaN|Inf", string(svg))
			written(t, f, "pdf")
		})
	}
}

func TestRefused(t *testing.T) {
	x := []float64{1, 2}
	good := figure.Panel{Lines: []figure.Line{{X: x, Y: x}}}
	with := func(panels ...figure.Panel) figure.Figure { return figure.Figure{Panels: panels} }
	for want, f := range map[string]figure.Figure{
		"the figure has no panels":               {},
		"cannot be drawn; give at most 200 cm":   {Panels: []figure.Panel{good}, Width: math.NaN()},
		"too narrow":                             {Panels: []figure.Panel{good}, Width: 2},
		"too low for 3 panels":                   {Panels: []figure.Panel{good, good, good}, Height: 4},
		"panel 2 (Power): nothing to draw":       with(good, figure.Panel{Y: figure.Axis{Label: "Power"}}),
		"there is no finite value":               with(figure.Panel{Lines: []figure.Line{{X: x, Y: []float64{math.NaN(), math.Inf(1)}}}}),
		"positive where the axis is logarithmic": with(figure.Panel{Y: figure.Axis{Log: true}, Lines: []figure.Line{{X: x, Y: []float64{0, -1}}}}),
		`line "a": 2 values of x, 1 of y`:        with(figure.Panel{Lines: []figure.Line{{Label: "a", X: x, Y: x[:1]}}}),
		"2 lower and 1 upper limits":             with(figure.Panel{Lines: []figure.Line{{X: x, Y: x, Low: x, High: x[:1]}}}),
		`points "b": 2 values of x, 1 of y`:      with(figure.Panel{Points: []figure.Points{{Label: "b", X: x, Y: x, Error: x[:1]}}}),
		"is too large to be drawn":               with(figure.Panel{Lines: []figure.Line{{X: x, Y: []float64{1, 2e300}}}}),
		"a share of -1":                          with(figure.Panel{Share: -1, Lines: good.Lines}),
		"map: 1 columns of values, 2 places":     with(figure.Panel{Map: &figure.Map{X: x, Y: x, Values: [][]float64{{1, 2}}}}),
		"map: 1 values in column 0, 2 places":    with(figure.Panel{Map: &figure.Map{X: x[:1], Y: x, Values: [][]float64{{1}}}}),
		"the map has no finite value":            with(figure.Panel{Map: &figure.Map{X: x[:1], Y: x[:1], Values: [][]float64{{math.NaN()}}}}),
		"X[1] = 1: places must be finite":        with(figure.Panel{Map: &figure.Map{X: []float64{1, 1}, Y: x[:1], Values: [][]float64{{1}, {2}}}}),
		"Y[0] = -1: places must be finite":       with(figure.Panel{Y: figure.Axis{Log: true}, Map: &figure.Map{X: x[:1], Y: []float64{-1}, Values: [][]float64{{1}}}}),
		"map: 1e+301 is too large to be drawn":   with(figure.Panel{Map: &figure.Map{X: x[:1], Y: x[:1], Values: [][]float64{{1e301}}}}),
	} {
		assert.ErrorContains(t, f.Write(io.Discard, "svg"), want)
	}
	f := with(good)
	f.Width, f.Height = 6, 5
	assert.ErrorContains(t, f.Write(io.Discard, "gif"), `unknown format "gif"; use png, svg or pdf`)
	for _, format := range figure.Formats {
		assert.ErrorContains(t, f.Write(full{}, format), "no space left")
	}
}

type full struct{}

func (full) Write([]byte) (int, error) { return 0, errors.New("no space left") }

// FuzzWrite: any numbers are drawn or refused, and no nonsense gets into the picture.
func FuzzWrite(f *testing.F) {
	f.Add([]byte("01234567890123456789012345678901"), false, true)
	f.Add(binary.LittleEndian.AppendUint64(nil, math.Float64bits(1e300)), true, false)
	f.Fuzz(func(t *testing.T, data []byte, logX, logY bool) {
		var x, y []float64
		for ; len(data) >= 16; data = data[16:] {
			x = append(x, math.Float64frombits(binary.LittleEndian.Uint64(data)))
			y = append(y, math.Float64frombits(binary.LittleEndian.Uint64(data[8:])))
		}
		fig := figure.Figure{Panels: []figure.Panel{{
			X: figure.Axis{Unit: "s", Log: logX}, Y: figure.Axis{Unit: "1/s", Log: logY},
			Lines:  []figure.Line{{X: x, Y: y, Low: y, High: x}},
			Points: []figure.Points{{X: x, Y: y, Error: x}},
		}}}
		var out bytes.Buffer
		if err := fig.Write(&out, "svg"); err != nil {
			return
		}
		if bytes.Contains(out.Bytes(), []byte("NaN")) || bytes.Contains(out.Bytes(), []byte("Inf")) {
			t.Fatal(fmt.Sprint("nonsense in the picture of ", x, y))
		}
	})
}
