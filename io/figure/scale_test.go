package figure

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
)

// The prefixes and their symbols are those of the SI Brochure, 9th edition,
// table 7; that a number in front of a unit lies between 0.1 and 1000 is its
// customary use (ISO 80000-1, 7.2.2).
func TestScale(t *testing.T) {
	for _, c := range []struct {
		unit      string
		low, high float64
		log       bool
		want      string
		shown     float64 // of high
	}{
		{"s", 0, 10e-3, false, "ms", 10},
		{"s", 0, 3e-6, false, "µs", 3},
		{"s", 0, 999e-6, false, "µs", 999},
		{"s", 0, 1e-3, false, "ms", 1},
		{"s", 0, 250e-9, false, "ns", 250},
		{"s", 0, 7200, false, "s", 7200},
		{"s", 0, 2e6, false, "10⁶ s", 2},
		{"s", 0, 4e-21, false, "10⁻²¹ s", 4},
		{"Hz", -5e3, 5e3, false, "kHz", 5},
		{"Hz", 0, 6.07e6, false, "MHz", 6.07},
		{"Hz", 0, 4.29e14, false, "THz", 429},
		{"Hz", 0, 2e-3, false, "mHz", 2},
		{"T", 0, 1e-4, false, "µT", 100},
		{"W", 0, 0.02, false, "mW", 20},
		{"m", 0, 780e-9, false, "nm", 780},
		{"rad", 0, 2 * math.Pi, false, "π rad", 2},
		{"rad", 0, 0.02, false, "mrad", 20},
		{"1", 0, 1, false, "", 1},
		{"1", 0, 0.05, false, "", 0.05},
		{"", 0, 20000, false, "", 20000},
		{"1", 0, 2e-5, false, "10⁻⁶", 20},
		{"1/s", 0, 3.8e7, false, "10⁶ s⁻¹", 38},
		{"Hz/T^2", 0, 57.5, false, "Hz/T²", 57.5},
		{"s", 1e-5, 1e-2, true, "ms", 10},
		{"s", 1e-6, 10, true, "s", 10},
	} {
		s := scaleFor(c.unit, c.low, c.high, c.log)
		assert.Equal(t, c.want, s.unit, "%+v", c)
		assert.InEpsilon(t, c.shown, s.shown(c.high), 1e-12, "%+v", c)
		assert.Zero(t, s.origin)
	}
}

func TestScaleCountsFromWithin(t *testing.T) {
	const line = 429228004229874.0
	s := scaleFor("Hz", line-300, line+500, false)
	assert.Equal(t, "Hz", s.unit)
	assert.InDelta(t, 0, s.shown(line), 1000, "counted from a value inside the axis")
	assert.Equal(t, 800.0, s.shown(line+500)-s.shown(line-300))
	assert.Equal(t, "Frequency − 429.22800423 THz (Hz)", s.labelled("Frequency", "Hz"))
	s = scaleFor("1", 1-2e-7, 1, false)
	assert.Equal(t, "Fidelity − 1 (10⁻⁹)", s.labelled("Fidelity", "1"))
}

func labels(ticks []tick) (out []string) {
	for _, t := range ticks {
		if t.label != "" {
			out = append(out, t.label)
		}
	}
	return out
}

func TestTicks(t *testing.T) {
	assert.Equal(t, []string{"0", "2", "4", "6", "8", "10"}, labels(linearTicks(0, 10, 6)))
	assert.Equal(t, []string{"−0.5", "0.0", "0.5"}, labels(linearTicks(-0.52, 0.52, 3)))
	assert.Equal(t, []string{"0.980", "0.985", "0.990"}, labels(linearTicks(0.978, 0.9905, 3)))
	assert.Equal(t, []string{"500", "1000"}, labels(linearTicks(499, 1001, 1)), "two labels even where one step is asked")
	assert.Equal(t, []string{"0.01", "0.1", "1", "10"}, labels(logTicks(0.005, 30, 9)))
	assert.Equal(t, []string{"10⁻⁶", "10⁻⁴", "10⁻²", "10⁰"}, labels(logTicks(1e-6, 1, 3)))
	assert.Equal(t, []string{"2", "4", "6"}, labels(logTicks(1.5, 7, 4)), "less than two powers of ten: as linear")
	for _, ticks := range [][]tick{linearTicks(-3, 7, 5), logTicks(2, 3e4, 5)} {
		for _, tick := range ticks {
			assert.True(t, tick.at >= -3 && tick.at <= 3e4)
		}
	}
}

func TestWrapped(t *testing.T) {
	face := letters(labelSize)
	lines := wrapped(face, "photons per second leaving by these decays (10⁶ s⁻¹)", 150)
	assert.Greater(t, len(lines), 1)
	for _, line := range lines {
		assert.LessOrEqual(t, width(face, line), letters(1).Font.Size*150)
	}
	assert.Equal(t, "short", cut(face, "short", 100))
	assert.Regexp(t, "^a*…$", cut(face, "aaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaa", 100))
	assert.Empty(t, wrapped(face, "", 100))
	assert.Less(t, width(face, "10⁻⁶"), width(face, "10−6"), "raised figures are small")
	assert.NotEmpty(t, outline(face, "µπΩΔ−±"))
}
