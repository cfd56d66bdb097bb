package figure

import (
	"image/color"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
)

// TestOKLab checks the conversion against CSS Color Module Level 4: white is
// L = 1, and sRGB red is oklch(0.62796 0.25768 29.234°), lime
// oklch(0.86644 0.29483 142.495°), blue oklch(0.45201 0.31321 264.052°).
func TestOKLab(t *testing.T) {
	for _, c := range []struct {
		l, chroma, hue float64
		want           [3]float64
	}{
		{1, 0, 0, [3]float64{1, 1, 1}},
		{0.62796, 0.25768, 29.234, [3]float64{1, 0, 0}},
		{0.86644, 0.29483, 142.495, [3]float64{0, 1, 0}},
		{0.45201, 0.31321, 264.052, [3]float64{0, 0, 1}},
	} {
		sin, cos := math.Sincos(c.hue * math.Pi / 180)
		got := linearOf([3]float64{c.l, c.chroma * cos, c.chroma * sin})
		for i := range got {
			assert.InDelta(t, c.want[i], got[i], 2e-4, "%+v", c) // five digits given, cubed
		}
	}
	// IEC 61966-2-1: the linear value 0.2140 is the middle of the code values.
	assert.Equal(t, uint8(128), encoded(0.2159))
	assert.Equal(t, uint8(0), encoded(-1))
	assert.Equal(t, uint8(255), encoded(2))
}

// cieLab is CIE 1976 L*a*b* for D65 (CIE 15:2004), computed from the colour
// codes: an independent measure of seen differences.
func cieLab(c color.RGBA) [3]float64 {
	linear := func(v uint8) float64 {
		x := float64(v) / 255
		if x <= 0.04045 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	r, g, b := linear(c.R), linear(c.G), linear(c.B)
	f := func(t float64) float64 {
		if t > 216.0/24389 {
			return math.Cbrt(t)
		}
		return (24389.0/27*t + 16) / 116
	}
	x := f((0.4124*r + 0.3576*g + 0.1805*b) / 0.9505)
	y := f(0.2126*r + 0.7152*g + 0.0722*b)
	z := f((0.0193*r + 0.1192*g + 0.9505*b) / 1.0890)
	return [3]float64{116*y - 16, 500 * (x - y), 200 * (y - z)}
}

func TestRamp(t *testing.T) {
	const steps = 32
	for i := range 1001 {
		for _, v := range linearOf(rampLab(float64(i) / 1000)) {
			assert.True(t, v > -0.002 && v < 1.002, "colour %d/1000 can be shown: %v", i, v)
		}
	}
	least, most := math.Inf(1), 0.0
	for i := range steps {
		from, to := cieLab(rampColour(float64(i)/steps)), cieLab(rampColour(float64(i+1)/steps))
		lightness := to[0] - from[0]
		assert.Greater(t, lightness, 1.0, "a grey copy carries every step")
		least, most = min(least, lightness), max(most, lightness)
	}
	// Equal lightness steps as CIELAB sees them, whose own error is of this size.
	assert.Less(t, most/least, 1.6)
	assert.Equal(t, rampColour(0), rampColour(-1))
	assert.Equal(t, rampColour(1), rampColour(2))
}

// TestCurveColours holds the colours to the published table (Okabe and Ito 2008,
// "Color Universal Design", figure 16), yellow left out.
func TestCurveColours(t *testing.T) {
	assert.Equal(t, []color.RGBA{
		{0, 114, 178, 255}, {213, 94, 0, 255}, {0, 158, 115, 255}, {204, 121, 167, 255},
		{230, 159, 0, 255}, {86, 180, 233, 255}, {0, 0, 0, 255},
	}, curveColours)
	seen := map[string]bool{}
	for i := range 28 {
		look := curve(i)
		seen[string([]byte{look.colour.R, look.colour.G, byte(len(look.dashes)), byte(10 * append(look.dashes, 0)[0])})] = true
	}
	assert.Len(t, seen, 28, "28 curves differ")
}
