package figure

import (
	"image/color"
	"math"
	"sync"

	"gonum.org/v1/plot/vg"
)

// curveColours tell curves apart for readers with any kind of colour vision
// (Okabe and Ito 2008, "Color Universal Design"); yellow is left out, it cannot
// be read on white.
var curveColours = []color.RGBA{
	{0x00, 0x72, 0xb2, 0xff}, // blue
	{0xd5, 0x5e, 0x00, 0xff}, // vermilion
	{0x00, 0x9e, 0x73, 0xff}, // bluish green
	{0xcc, 0x79, 0xa7, 0xff}, // reddish purple
	{0xe6, 0x9f, 0x00, 0xff}, // orange
	{0x56, 0xb4, 0xe9, 0xff}, // sky blue
	{0x00, 0x00, 0x00, 0xff}, // black
}

// curveDashes tell curves apart in a grey copy. There are four of them and
// seven colours, so that 28 curves differ.
var curveDashes = [][]vg.Length{
	nil,
	{6, 2.5},
	{1.6, 1.8},
	{7, 2, 1.6, 2},
}

var (
	white = color.RGBA{0xff, 0xff, 0xff, 0xff} // also a cell of a map without a value
	black = color.RGBA{A: 0xff}
	grey  = color.RGBA{0x80, 0x80, 0x80, 0xff}
)

func curveColour(i int) color.RGBA { return curveColours[i%len(curveColours)] }
func curveDash(i int) []vg.Length  { return curveDashes[i%len(curveDashes)] }
func bandColour(i int) color.RGBA  { return tint(curveColour(i), 0.25) }
func bandEdge(i int) color.RGBA    { return tint(curveColour(i), 0.45) }

// tint mixes a colour with white. (Transparency would need one more case for
// each format.)
func tint(c color.RGBA, share float64) color.RGBA {
	mix := func(v uint8) uint8 { return uint8(math.Round(255 - share*(255-float64(v)))) }
	return color.RGBA{mix(c.R), mix(c.G), mix(c.B), 0xff}
}

// The colours of a map run from dark blue over a dull green to light yellow,
// ends that all common kinds of colour vision tell apart, in the space OKLab
// (Ottosson 2020). That space is made so that distances are seen differences.
// Lightness rises evenly, so that a grey copy carries the value too, and the
// path bends so little that equal steps of the value look equal.
var (
	rampFrom = [3]float64{0.24, -0.005, -0.105}
	rampTo   = [3]float64{0.95, -0.030, 0.130}
)

const rampBend = -0.06 // towards green, half way

// rampLab returns the colour for a value from 0 to 1 as L, a, b.
func rampLab(v float64) (lab [3]float64) {
	for i := range lab {
		lab[i] = rampFrom[i] + v*(rampTo[i]-rampFrom[i])
	}
	lab[1] += 4 * v * (1 - v) * rampBend
	return lab
}

// ramp holds the colours of a map, more of them than 8 bits can tell apart.
var ramp = sync.OnceValue(func() *[1024]color.RGBA {
	var colours [1024]color.RGBA
	for i := range colours {
		linear := linearOf(rampLab(float64(i) / float64(len(colours)-1)))
		colours[i] = color.RGBA{encoded(linear[0]), encoded(linear[1]), encoded(linear[2]), 0xff}
	}
	return &colours
})

// rampColour returns the colour for a value from 0 to 1.
func rampColour(v float64) color.RGBA {
	colours := ramp()
	return colours[int(math.Round(min(max(v, 0), 1)*float64(len(colours)-1)))]
}

// linearOf returns the linear red, green and blue of a colour in OKLab.
func linearOf(lab [3]float64) [3]float64 {
	cube := func(x float64) float64 { return x * x * x }
	l := cube(lab[0] + 0.3963377774*lab[1] + 0.2158037573*lab[2])
	m := cube(lab[0] - 0.1055613458*lab[1] - 0.0638541728*lab[2])
	s := cube(lab[0] - 0.0894841775*lab[1] - 1.2914855480*lab[2])
	return [3]float64{
		4.0767416621*l - 3.3077115913*m + 0.2309699292*s,
		-1.2684380046*l + 2.6097574011*m - 0.3413193965*s,
		-0.0041960863*l - 0.7034186147*m + 1.7076147010*s,
	}
}

// encoded is the transfer function of sRGB (IEC 61966-2-1).
func encoded(linear float64) uint8 {
	linear = min(max(linear, 0), 1)
	v := 12.92 * linear
	if linear > 0.0031308 {
		v = 1.055*math.Pow(linear, 1/2.4) - 0.055
	}
	return uint8(math.Round(255 * v))
}
