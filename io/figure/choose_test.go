package figure_test

import (
	"math"
	"strings"
	"testing"

	"rhotrace/io/figure"
	"rhotrace/io/table"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// A scan is a dial or time with its values; scanned makes the table of a run
// over all of them, the last one fastest.
type scan struct {
	name, unit, about string
	values            []float64
}

func steps(n int, from, to float64) []float64 {
	return sequence(n, func(i int) float64 { return from + (to-from)*float64(i)/float64(n-1) })
}

func scanned(signal bool, scans ...scan) *table.Table {
	rows := 1
	for _, s := range scans {
		rows *= len(s.values)
	}
	t := &table.Table{}
	stride := rows
	for _, s := range scans {
		stride /= len(s.values)
		t.Add(s.name, s.unit, s.about, sequence(rows, func(i int) float64 { return s.values[i/stride%len(s.values)] }))
	}
	upper := sequence(rows, func(i int) float64 { return 0.5 - 0.5*math.Cos(float64(i)/3) })
	t.Add("population.g", "1", "population of g", sequence(rows, func(i int) float64 { return 1 - upper[i] }))
	t.Add("population.e", "1", "population of e", upper)
	if signal {
		t.Add("signal", "1", "bright probability", upper)
		t.Add("signal.sd", "1", "its standard deviation", sequence(rows, func(int) float64 { return 0.02 }))
	}
	return t
}

var (
	wait = scan{"step.dark.lasts", "s", "duration", steps(21, 0, 10e-3)}
	tune = scan{"drive.clock.detuning", "Hz", "detuning", steps(11, -2e3, 2e3)}
	few  = scan{"sequence.n", "1", "repeats", []float64{1, 2, 4}}
	time = scan{"time", "s", "time", steps(31, 0, 1e-6)}
)

func choose(t *testing.T, tb *table.Table, c figure.Choice) *figure.Figure {
	t.Helper()
	f, err := figure.FromTable(tb, c)
	require.NoError(t, err)
	drawn := *f
	drawn.Width, drawn.Height = 9, 8 // small maps are fast
	written(t, &drawn, "svg")
	return f
}

func names(p figure.Panel) (out []string) {
	for _, l := range p.Lines {
		out = append(out, l.Label)
	}
	return out
}

func TestOneScan(t *testing.T) {
	tb := scanned(true, wait)
	f := choose(t, tb, figure.Choice{})
	require.Len(t, f.Panels, 1)
	p := f.Panels[0]
	assert.Equal(t, figure.Axis{Label: "Duration, step.dark.lasts", Unit: "s"}, p.X)
	assert.Equal(t, figure.Axis{Label: "Bright probability", Unit: "1"}, p.Y)
	require.Len(t, p.Lines, 1)
	assert.Equal(t, wait.values, p.Lines[0].X)
	assert.Equal(t, tb.Column("signal").Values, p.Lines[0].Y)
	assert.Nil(t, p.Lines[0].Low)
	assert.Contains(t, texts(t, written(t, f, "svg")), "Duration, step.dark.lasts (ms)")

	f = choose(t, tb, figure.Choice{Band: true, Labels: map[string]string{"step.dark.lasts": "Dark time"}})
	assert.InDelta(t, f.Panels[0].Lines[0].Y[3]-0.02, f.Panels[0].Lines[0].Low[3], 1e-15)
	assert.InDelta(t, f.Panels[0].Lines[0].Y[3]+0.02, f.Panels[0].Lines[0].High[3], 1e-15)
	assert.Equal(t, "Dark time", f.Panels[0].X.Label)
}

func TestPopulations(t *testing.T) {
	f := choose(t, scanned(false, time), figure.Choice{})
	assert.Equal(t, []string{"g", "e"}, names(f.Panels[0]))
	assert.Equal(t, "Population", f.Panels[0].Y.Label)
	assert.Equal(t, "Time", f.Panels[0].X.Label)
	assert.Contains(t, texts(t, written(t, f, "svg")), "Time (µs)", "1e-6 s at the end, and room for the curve")
}

func TestTwoScans(t *testing.T) {
	tb := scanned(true, tune, wait)
	f := choose(t, tb, figure.Choice{})
	m := f.Panels[0].Map
	require.NotNil(t, m)
	assert.Equal(t, wait.values, m.X, "the fastest scan runs to the right")
	assert.Equal(t, tune.values, m.Y)
	assert.Equal(t, "Bright probability", m.Value.Label)
	for i := range m.X {
		for j := range m.Y {
			assert.Equal(t, tb.Column("signal").Values[j*len(m.X)+i], m.Values[i][j])
		}
	}
	f = choose(t, tb, figure.Choice{X: tune.name, Across: wait.name, Y: []string{"population.g"}})
	assert.Equal(t, tune.values, f.Panels[0].Map.X)

	f = choose(t, tb, figure.Choice{At: map[string]float64{tune.name: 390}})
	require.Len(t, f.Panels[0].Lines, 1)
	assert.Equal(t, tb.Column("signal").Values[6*21:7*21], f.Panels[0].Lines[0].Y, "400 Hz is nearest")

	_, err := figure.FromTable(tb, figure.Choice{X: wait.name})
	assert.EqualError(t, err, "figure: beside step.dark.lasts these vary too: drive.clock.detuning (11 values); "+
		"choose one value of each (At), or one of them for the other axis of a map (Across)")
	_, err = figure.FromTable(scanned(false, tune, wait), figure.Choice{})
	assert.ErrorContains(t, err, "shows one column, there are 2; choose one (Y)")
}

func TestFamily(t *testing.T) {
	for _, tb := range []*table.Table{scanned(true, few, wait), scanned(true, wait, few)} {
		f := choose(t, tb, figure.Choice{})
		assert.Equal(t, []string{"sequence.n = 1", "sequence.n = 2", "sequence.n = 4"}, names(f.Panels[0]))
		assert.Equal(t, wait.values, f.Panels[0].Lines[2].X)
	}
	slow := scan{"step.gap.lasts", "s", "", []float64{0, 2e-3}}
	f := choose(t, scanned(false, slow, tune), figure.Choice{})
	assert.Equal(t, []string{"g, step.gap.lasts = 0 s", "g, step.gap.lasts = 2 ms", "e, step.gap.lasts = 0 s", "e, step.gap.lasts = 2 ms"},
		names(f.Panels[0]))
	f = choose(t, scanned(true, few, wait), figure.Choice{Across: few.name})
	assert.NotNil(t, f.Panels[0].Map, "unless a map is asked for")
}

func TestSeveralScans(t *testing.T) {
	tb := scanned(true, tune, wait, few)
	_, err := figure.FromTable(tb, figure.Choice{})
	assert.ErrorContains(t, err, "beside sequence.n these vary too: drive.clock.detuning (11 values), step.dark.lasts (21 values); choose")
	f := choose(t, tb, figure.Choice{At: map[string]float64{few.name: 2}})
	assert.NotNil(t, f.Panels[0].Map)
	f = choose(t, tb, figure.Choice{At: map[string]float64{few.name: 2, tune.name: 0}})
	assert.Len(t, f.Panels[0].Lines, 1)
}

// TestRunTogether: two dials of one scan are one axis.
func TestRunTogether(t *testing.T) {
	tb := scanned(true, wait)
	tb.Columns = append([]table.Column{{Name: "step.gap.lasts", Unit: "s", Values: steps(21, 5e-3, 0)}}, tb.Columns...)
	f := choose(t, tb, figure.Choice{})
	assert.Equal(t, "step.gap.lasts", f.Panels[0].X.Label)
	assert.IsIncreasing(t, f.Panels[0].Lines[0].X)
	f = choose(t, tb, figure.Choice{X: wait.name})
	assert.Equal(t, wait.values, f.Panels[0].Lines[0].X)
}

// TestTimesOfTheirOwn: while a duration is scanned, every point has other times.
func TestTimesOfTheirOwn(t *testing.T) {
	long := scan{"step.pulse.lasts", "s", "duration", steps(9, 1e-6, 9e-6)}
	tb := scanned(true, long, time)
	for i := range tb.Columns[1].Values {
		tb.Columns[1].Values[i] *= tb.Columns[0].Values[i] * (1 + 1e-3*float64(i%31))
	}
	_, err := figure.FromTable(tb, figure.Choice{})
	assert.ErrorContains(t, err, "do not fill a grid of")
	f := choose(t, tb, figure.Choice{At: map[string]float64{long.name: 5e-6}})
	assert.Len(t, f.Panels[0].Lines[0].X, 31)
}

func TestLogScan(t *testing.T) {
	decades := scan{"step.dark.lasts", "s", "duration", sequence(31, func(i int) float64 { return 1e-6 * math.Pow(10, float64(i)/10) })}
	assert.True(t, choose(t, scanned(true, decades), figure.Choice{}).Panels[0].X.Log)
	assert.False(t, choose(t, scanned(true, wait), figure.Choice{}).Panels[0].X.Log)
	m := choose(t, scanned(true, decades, tune), figure.Choice{}).Panels[0]
	assert.True(t, m.Y.Log)
	assert.False(t, m.X.Log)
}

// TestUnits: columns of different units get panels of their own.
func TestUnits(t *testing.T) {
	tb := scanned(true, wait)
	tb.Add("shift", "Hz", "light shift", steps(21, 0, 3e3))
	f := choose(t, tb, figure.Choice{Y: []string{"signal", "shift", "population.e"}})
	require.Len(t, f.Panels, 2)
	assert.Equal(t, []string{"signal", "e"}, names(f.Panels[0]))
	assert.Equal(t, "Signal, population", f.Panels[0].Y.Label)
	assert.Equal(t, figure.Axis{Label: "Light shift", Unit: "Hz"}, f.Panels[1].Y)
	got := strings.Join(texts(t, written(t, f, "svg")), "|")
	assert.Contains(t, got, "Light shift (kHz)")
	assert.Equal(t, 1, strings.Count(got, "(ms)"), "they share the axis below")
}

func TestCoherences(t *testing.T) {
	tb := scanned(false, wait)
	tb.Add("coherence.g:e.re", "1", "Re ρ_ge", steps(21, -0.5, 0.5))
	tb.Add("coherence.g:e.im", "1", "Im ρ_ge", steps(21, 0.5, -0.5))
	f := choose(t, tb, figure.Choice{Y: []string{"coherence.g:e.re", "coherence.g:e.im"}})
	assert.Equal(t, []string{"Re g:e", "Im g:e"}, names(f.Panels[0]))
	assert.Equal(t, "Coherence", f.Panels[0].Y.Label)
	f = choose(t, tb, figure.Choice{X: "coherence.g:e.re", Y: []string{"coherence.g:e.im"}})
	assert.Equal(t, "Re ρ_ge", f.Panels[0].X.Label)
}

func TestOnePoint(t *testing.T) {
	f := choose(t, scanned(true, scan{"step.dark.lasts", "s", "", []float64{2e-3}}), figure.Choice{})
	assert.Equal(t, []float64{2e-3}, f.Panels[0].Lines[0].X)
}

func TestFromTableRefused(t *testing.T) {
	tb := scanned(true, wait)
	for want, call := range map[string]func() (*figure.Figure, error){
		"the table has no rows":            func() (*figure.Figure, error) { return figure.FromTable(&table.Table{}, figure.Choice{}) },
		`no column "sginal"; it has step.`: func() (*figure.Figure, error) { return figure.FromTable(tb, figure.Choice{Y: []string{"sginal"}}) },
		`no column "t"`:                    func() (*figure.Figure, error) { return figure.FromTable(tb, figure.Choice{X: "t"}) },
		`no column "u"`:                    func() (*figure.Figure, error) { return figure.FromTable(tb, figure.Choice{Across: "u"}) },
		`no column "v"`: func() (*figure.Figure, error) {
			return figure.FromTable(tb, figure.Choice{At: map[string]float64{"v": 1}})
		},
		`has no value near NaN`: func() (*figure.Figure, error) {
			return figure.FromTable(tb, figure.Choice{At: map[string]float64{"time": math.NaN()}})
		},
		"there is nothing to draw against": func() (*figure.Figure, error) { return figure.FromTable(scanned(true), figure.Choice{}) },
		"neither a signal nor populations": func() (*figure.Figure, error) {
			return figure.FromTable(&table.Table{Columns: []table.Column{{Name: "x", Values: []float64{1}}}}, figure.Choice{})
		},
		"two columns are named": func() (*figure.Figure, error) {
			return figure.FromTable(&table.Table{Columns: []table.Column{{Name: "x"}, {Name: "x"}}}, figure.Choice{})
		},
		"do not fill a grid of 21 values of": func() (*figure.Figure, error) {
			return figure.FromTable(tb, figure.Choice{X: wait.name, Across: "population.g"})
		},
	} {
		if strings.Contains(want, "near NaN") {
			tb.Columns[0].Name = "time"
		} else {
			tb.Columns[0].Name = wait.name
		}
		_, err := call()
		assert.ErrorContains(t, err, want)
	}
}
