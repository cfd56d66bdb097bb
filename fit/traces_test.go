package fit_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/experiment"
	"rhotrace/fit"
)

const atom = `format = 1
[level.g]
[level.e]
[drive.d]
between = ["g", "e"]
rabi = "10 kHz"
detuning = "DETUNING"
[decay.x]
from = "e"
to = "g"
lifetime = "LIFETIME"
[dephasing.y]
weights = { e = 1 }
time = "TIME"
[step.half]
on = ["d"]
area = "0.5 pi"
[step.wait]
lasts = "1 ms"
[sequence]
order = "half wait half"
[scan.w]
dial = "step.wait.lasts"
from = "0 ms"
to = "10 ms"
points = 81
[readout]
bright = "g"
shots = 100
`

func read(t testing.TB, text string) *experiment.Experiment {
	t.Helper()
	e, err := experiment.Read(filepath.Join(t.TempDir(), "x.toml"), []byte(text))
	require.NoError(t, err)
	return e
}

// draw runs an experiment and draws binomial shots from its signal: invented
// data, seeded.
func draw(t testing.TB, e *experiment.Experiment, seed uint64, shots int, scale, offset float64) *experiment.Trace {
	t.Helper()
	out, err := experiment.Run(context.Background(), e)
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(seed, 1))
	tr := &experiment.Trace{Name: "drawn", File: "drawn.csv", Is: "fraction", Bright: true, Shows: "signal"}
	dial := out.Columns[0]
	tr.Dials = []string{dial.Name}
	for i, p := range out.Column("signal").Values {
		p = offset + scale*p
		k := 0
		for range shots {
			if r.Float64() < p {
				k++
			}
		}
		tr.Points = append(tr.Points, []float64{dial.Values[i]})
		tr.Y = append(tr.Y, float64(k)/float64(shots))
		tr.Shots = append(tr.Shots, float64(shots))
	}
	return tr
}

func fill(text string, pairs ...string) string { return strings.NewReplacer(pairs...).Replace(text) }

// From starts far away, a fit finds the values that the data were drawn with.
func TestFitsFindTheTruth(t *testing.T) {
	ramsey := fill(atom, "LIFETIME", "1 s", "TIME", "TTT", "DETUNING", "DDD")
	flop := fill(atom, "DETUNING", "0 Hz", "LIFETIME", "1 s", "TIME", "TTT", "order = \"half wait half\"", "order = \"pulse\"",
		"[step.wait]", "[step.pulse]\non = [\"d\"]\nlasts = \"1 us\"\n[step.wait]", "step.wait.lasts", "step.pulse.lasts", "to = \"10 ms\"", "to = \"1 ms\"", "rabi = \"10 kHz\"", "rabi = \"RRR\"")
	relax := fill(atom, "DETUNING", "0 Hz", "LIFETIME", "LLL", "TIME", "1 s", "half wait half", "wait", "bright = \"g\"", "bright = \"e\"", "[readout]", "[start]\npopulations = { e = 1 }\n[readout]")
	line := fill(atom, "DETUNING", "0 Hz", "LIFETIME", "1 s", "TIME", "1 s", "step.wait.lasts", "dial.probe.value", "from = \"0 ms\"", "from = \"-8 kHz\"", "to = \"10 ms\"", "to = \"8 kHz\"",
		"half wait half", "pulse", "[step.wait]", "[step.pulse]\non = [\"d\"]\nlasts = \"400 us\"\n[step.wait]", "rabi = \"10 kHz\"", "rabi = \"1.25 kHz\"",
		"[scan.w]", "[dial.probe]\nturns = { \"drive.d.detuning\" = 1 }\nvalue = \"0 Hz\"\n[dial.centre]\nturns = { \"drive.d.detuning\" = -1 }\nvalue = \"CCC\"\n[scan.w]")
	for _, c := range []struct {
		name, text    string
		truth, guess  []string
		scale, offset float64
		unknowns      string
		want          map[string]float64
	}{
		{"fringe", ramsey, []string{"DDD", "417 Hz", "TTT", "6 ms"}, []string{"DDD", "20 Hz", "TTT", "60 ms"}, 1, 0,
			"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"0 Hz\"\n[unknown.time]\ndial = \"dephasing.y.time\"\n", map[string]float64{"detuning": 417, "time": 6e-3}},
		{"fast fringe", ramsey, []string{"DDD", "2713 Hz", "TTT", "4 ms"}, []string{"DDD", "200 Hz", "TTT", "1 ms"}, 1, 0,
			"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"0 Hz\"\nhigh = \"4 kHz\"\n[unknown.time]\ndial = \"dephasing.y.time\"\n", map[string]float64{"detuning": 2713, "time": 4e-3}},
		{"flop", flop, []string{"RRR", "13.7 kHz", "TTT", "0.6 ms"}, []string{"RRR", "2 kHz", "TTT", "5 ms"}, 1, 0,
			"[unknown.rabi]\ndial = \"drive.d.rabi\"\n[unknown.time]\ndial = \"dephasing.y.time\"\n", map[string]float64{"rabi": 13.7e3, "time": 0.6e-3}},
		{"relaxation", relax, []string{"LLL", "2.2 ms"}, []string{"LLL", "300 ms"}, 1, 0,
			"[unknown.lifetime]\ndial = \"decay.x.lifetime\"\n", map[string]float64{"lifetime": 2.2e-3}},
		{"line", line, []string{"CCC", "2.9 kHz"}, []string{"CCC", "-5 kHz"}, 1, 0,
			"[unknown.centre]\ndial = \"dial.centre.value\"\n", map[string]float64{"centre": 2.9e3}},
		{"squeezed fringe", ramsey, []string{"DDD", "731 Hz", "TTT", "5 ms"}, []string{"DDD", "100 Hz", "TTT", "20 ms"}, 0.8, 0.07,
			"[trace.drawn]\nfile = \"no.csv\"\nx = \"w\"\nx-unit = \"s\"\ny = \"y\"\n[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"0 Hz\"\n[unknown.time]\ndial = \"dephasing.y.time\"\n[unknown.scale]\ndial = \"trace.drawn.scale\"\n[unknown.offset]\ndial = \"trace.drawn.offset\"\n",
			map[string]float64{"detuning": 731, "time": 5e-3, "scale": 0.8, "offset": 0.07}},
	} {
		t.Run(c.name, func(t *testing.T) {
			tr := draw(t, read(t, fill(c.text, c.truth...)), 7, 100, c.scale, c.offset)
			if strings.Contains(c.unknowns, "trace.drawn") {
				tr.Scale, tr.Offset = "trace.drawn.scale", "trace.drawn.offset"
			}
			a, err := fit.Traces(context.Background(), read(t, fill(c.text, c.guess...)+c.unknowns), []*experiment.Trace{tr}, fit.TraceSettings{})
			require.NoError(t, err)
			for _, u := range a.Unknowns {
				assert.InDelta(t, c.want[u.Name], u.Value, 4*u.Error, "%s: %g ± %g", u.Name, u.Value, u.Error)
				if u.Name != "offset" {
					assert.Less(t, u.Error, 0.4*math.Abs(u.Value))
				}
			}
			assert.True(t, a.ErrorsKnown)
			assert.InDelta(t, 1, a.ReducedChiSquare, 0.6) // 79 points: 4 standard deviations of χ²/ν are 0.64
			assert.Empty(t, a.Warnings)
		})
	}
}

// The errors printed are those that repeated experiments scatter by: over 60
// draws (value − truth)/error has mean 0 and standard deviation 1 within four
// times their counting errors 1/√60 and 1/√120.
func TestErrorsAreTheScatter(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "6 ms", "DETUNING", "417 Hz")
	e := read(t, text+"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"300 Hz\"\nhigh = \"600 Hz\"\n[unknown.time]\ndial = \"dephasing.y.time\"\nlow = \"1 ms\"\nhigh = \"30 ms\"\n")
	const draws = 60
	sum, square := map[string]float64{}, map[string]float64{}
	for seed := range draws {
		a, err := fit.Traces(context.Background(), e, []*experiment.Trace{draw(t, e, uint64(seed), 100, 1, 0)}, fit.TraceSettings{})
		require.NoError(t, err)
		for _, u := range a.Unknowns {
			truth, _ := e.Value(u.Dial)
			z := (u.Value - truth) / u.Error
			sum[u.Name] += z
			square[u.Name] += z * z
		}
	}
	for name := range sum {
		mean := sum[name] / draws
		assert.InDelta(t, 0, mean, 4/math.Sqrt(draws), name)
		assert.InDelta(t, 1, math.Sqrt(square[name]/draws-mean*mean), 4/math.Sqrt(2*draws), name)
	}
}

// Two traces of one atom share an unknown and keep their own scales.
func TestJointFit(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "6 ms", "DETUNING", "417 Hz")
	e := read(t, text)
	moved, err := e.With(experiment.Turn{Path: "drive.d.phase", Value: 0})
	require.NoError(t, err)
	one, two := draw(t, e, 3, 100, 0.9, 0.02), draw(t, moved, 4, 200, 0.7, 0.1)
	one.Scale, one.Offset, one.Name = "trace.a.scale", "trace.a.offset", "a"
	two.Scale, two.Offset, two.Name = "trace.b.scale", "trace.b.offset", "b"
	block := "[trace.NAME]\nfile = \"no.csv\"\nx = \"w\"\nx-unit = \"s\"\ny = \"y\"\n"
	asked := read(t, fill(text, "417 Hz", "100 Hz")+fill(block, "NAME", "a")+fill(block, "NAME", "b")+
		"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"0 Hz\"\n[unknown.time]\ndial = \"dephasing.y.time\"\nper = \"trace\"\n"+
		"[unknown.a]\ndial = \"trace.a.scale\"\n[unknown.b]\ndial = \"trace.b.scale\"\n[unknown.c]\ndial = \"trace.a.offset\"\n[unknown.d]\ndial = \"trace.b.offset\"\n")
	a, err := fit.Traces(context.Background(), asked, []*experiment.Trace{one, two}, fit.TraceSettings{})
	require.NoError(t, err)
	want := map[string]float64{"detuning": 417, "time[a]": 6e-3, "time[b]": 6e-3, "a": 0.9, "b": 0.7, "c": 0.02, "d": 0.1}
	require.Len(t, a.Unknowns, len(want))
	for _, u := range a.Unknowns {
		assert.InDelta(t, want[u.Name], u.Value, 4*u.Error, u.Name)
	}
	assert.Equal(t, 162, a.Table().Rows())
	assert.NotNil(t, a.Table().Column("trace"))
}

// What data cannot tell is said, not printed with digits.
func TestDoubtsAreSpoken(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "5 s", "DETUNING", "417 Hz")
	e := read(t, text)
	good := draw(t, e, 5, 100, 1, 0)
	guess := "417 Hz"
	said := func(unknowns string, tr *experiment.Trace) string {
		a, err := fit.Traces(context.Background(), read(t, strings.Replace(text, "417 Hz", guess, 1)+unknowns), []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		return strings.Join(a.Warnings, "\n")
	}
	assert.Contains(t, said("[unknown.time]\ndial = \"dephasing.y.time\"\n", good), "time is not constrained upwards")
	assert.Contains(t, said("[unknown.t]\ndial = \"dephasing.y.time\"\n[unknown.l]\ndial = \"decay.x.lifetime\"\n", good), "not constrained")
	assert.Contains(t, said("[unknown.detuning]\ndial = \"drive.d.detuning\"\n", good), "another answer fits as well", "the sign of the detuning")
	wavy := *good
	wavy.Y = append([]float64(nil), good.Y...)
	for i := range wavy.Y {
		wavy.Y[i] = math.Max(0, math.Min(1, wavy.Y[i]+0.2*math.Cos(2*math.Pi*1300*wavy.Points[i][0])))
	}
	said1 := said("[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"300 Hz\"\nhigh = \"500 Hz\"\n", &wavy)
	assert.Contains(t, said1, "1.3 kHz is left over")
	assert.Contains(t, said1, "larger than the errors allow")
	guess = "430 Hz"
	assert.Contains(t, said("[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"420 Hz\"\nhigh = \"500 Hz\"\n[unknown.x]\ndial = \"dephasing.y.time\"\n", draw(t, read(t, fill(text, "417 Hz", "300 Hz")), 3, 100, 1, 0)), "bound")
}

// Hostile traces end with a fit or a sentence.
func TestHostileTraces(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "6 ms", "DETUNING", "417 Hz") + "[unknown.detuning]\ndial = \"drive.d.detuning\"\n[unknown.time]\ndial = \"dephasing.y.time\"\n"
	make1 := func(n int, f func(i int) (x, y float64)) *experiment.Trace {
		tr := &experiment.Trace{Name: "h", Is: "value", Shows: "signal", Dials: []string{"step.wait.lasts"}}
		for i := range n {
			x, y := f(i)
			tr.Points, tr.Y = append(tr.Points, []float64{x}), append(tr.Y, y)
		}
		return tr
	}
	for name, tr := range map[string]*experiment.Trace{
		"constant":    make1(40, func(i int) (float64, float64) { return float64(i) * 1e-4, 0.3 }),
		"zeros":       make1(40, func(i int) (float64, float64) { return float64(i) * 1e-4, 0 }),
		"three":       make1(3, func(i int) (float64, float64) { return float64(i) * 1e-4, float64(i) }),
		"two":         make1(2, func(i int) (float64, float64) { return float64(i) * 1e-4, float64(i) }),
		"one":         make1(1, func(i int) (float64, float64) { return float64(i) * 1e-4, float64(i) }),
		"duplicate x": make1(30, func(i int) (float64, float64) { return 1e-3, float64(i % 3) }),
		"backwards":   make1(30, func(i int) (float64, float64) { return float64(30-i) * 1e-4, math.Cos(float64(i)) }),
		"spikes":      make1(30, func(i int) (float64, float64) { return float64(i) * 1e-4, math.Pow(10, float64(i%7)) }),
	} {
		t.Run(name, func(t *testing.T) {
			a, err := fit.Traces(context.Background(), read(t, text), []*experiment.Trace{tr}, fit.TraceSettings{})
			if err != nil {
				assert.NotContains(t, err.Error(), "\n")
				return
			}
			assert.NotEmpty(t, a.Warnings)
		})
	}
}

// The trace that ships with the example is drawn from this; see its remarks.
func TestExampleTrace(t *testing.T) {
	e, err := experiment.ReadFile("../examples/fit/experiment.toml")
	require.NoError(t, err)
	truth, err := e.With(experiment.Turn{Path: "drive.clock.detuning", Value: 417}, experiment.Turn{Path: "dephasing.field.time", Value: 6.5e-3})
	require.NoError(t, err)
	tr := draw(t, truth, 2026, 100, 0.94, 0.03)
	var b strings.Builder
	b.WriteString("# invented: drawn from a fringe with a detuning of 417 Hz, Tφ = 6.5 ms, scale 0.94, offset 0.03\nwait_ms,bright\n")
	for i, y := range tr.Y {
		fmt.Fprintf(&b, "%.4g,%g\n", tr.Points[i][0]*1e3, y)
	}
	const file = "../examples/fit/evening.csv"
	if _, err := os.Stat(file); os.IsNotExist(err) {
		require.NoError(t, os.WriteFile(file, []byte(b.String()), 0o644))
	}
	text, err := os.ReadFile(file)
	require.NoError(t, err)
	assert.Equal(t, b.String(), strings.ReplaceAll(string(text), "\r\n", "\n"), "remove the file to draw it anew")
	traces, err := e.Traces()
	require.NoError(t, err)
	a, err := fit.Traces(context.Background(), e, traces, fit.TraceSettings{})
	require.NoError(t, err)
	for i, want := range []float64{417, 6.5e-3, 0.94, 0.03} {
		u := a.Unknowns[i]
		assert.InDelta(t, want, u.Value, 4*u.Error, u.Name)
	}
	assert.Empty(t, a.Warnings)
}

// noisy is the trace of an experiment with Gaussian scatter of unknown size.
func noisy(t testing.TB, e *experiment.Experiment, seed uint64, sigma, scale, offset float64) *experiment.Trace {
	t.Helper()
	tr := draw(t, e, seed, 1, 1, 0)
	out, err := experiment.Run(context.Background(), e)
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(seed, 2))
	for i, v := range out.Column("signal").Values {
		tr.Y[i] = offset + scale*v + sigma*r.NormFloat64()
	}
	tr.Is, tr.Shots = "value", nil
	return tr
}

// Even sampling cannot tell a frequency from its aliases: with a first guess far
// beyond half the sampling rate a fit answers with the one below, and says so.
func TestAliasesAreNotPreferred(t *testing.T) {
	text := fill(atom, "DETUNING", "0 Hz", "LIFETIME", "1 s", "TIME", "0.6 ms", "order = \"half wait half\"", "order = \"pulse\"",
		"[step.wait]", "[step.pulse]\non = [\"d\"]\nlasts = \"1 us\"\n[step.wait]", "step.wait.lasts", "step.pulse.lasts", "to = \"10 ms\"", "to = \"1 ms\"", "rabi = \"10 kHz\"", "rabi = \"RRR\"")
	tr := noisy(t, read(t, fill(text, "RRR", "13.7 kHz")), 9, 0.02, 1, 0)
	for _, guess := range []string{"1.37 kHz", "137 kHz", "93.7 kHz", "66.3 kHz"} { // 80 kHz is the sampling rate
		a, err := fit.Traces(context.Background(), read(t, fill(text, "RRR", guess)+"[unknown.rabi]\ndial = \"drive.d.rabi\"\n"), []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		assert.InDelta(t, 13.7e3, a.Unknowns[0].Value, 4*a.Unknowns[0].Error, guess)
	}
	bounds := "low = \"1 kHz\"\nhigh = \"100 kHz\"\n"
	a, err := fit.Traces(context.Background(), read(t, fill(text, "RRR", "90 kHz")+"[unknown.rabi]\ndial = \"drive.d.rabi\"\n"+bounds), []*experiment.Trace{tr}, fit.TraceSettings{})
	require.NoError(t, err)
	assert.InDelta(t, 13.7e3, a.Unknowns[0].Value, 4*a.Unknowns[0].Error)
	assert.Contains(t, strings.Join(a.Warnings, "\n"), "another answer fits", "aliases within the bounds")
}

// A lifetime that data without any decay leave open gets a limit: there the sum
// of squares, with all other unknowns fitted anew, is larger by one.
func TestLimitIsThatOfTheProfile(t *testing.T) {
	text := fill(atom, "LIFETIME", "1000 s", "TIME", "TTT", "DETUNING", "417 Hz")
	block := "[trace.drawn]\nfile = \"no.csv\"\nx = \"w\"\nx-unit = \"s\"\ny = \"y\"\n[unknown.scale]\ndial = \"trace.drawn.scale\"\n[unknown.offset]\ndial = \"trace.drawn.offset\"\n"
	limits := 0
	for seed := range uint64(6) {
		tr := noisy(t, read(t, fill(text, "TTT", "100 s")), seed, 0.05, 2, 1)
		tr.Scale, tr.Offset = "trace.drawn.scale", "trace.drawn.offset"
		tr.Error = make([]float64, len(tr.Y))
		for i := range tr.Error {
			tr.Error[i] = 0.05
		}
		a, err := fit.Traces(context.Background(), read(t, fill(text, "TTT", "3 ms")+block+"[unknown.time]\ndial = \"dephasing.y.time\"\n"), []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		u := a.Unknowns[2]
		assert.Contains(t, strings.Join(a.Warnings, "\n"), "longer than", "the window is 10 ms")
		if !math.IsNaN(u.Error) {
			continue
		}
		limits++
		assert.True(t, math.IsInf(u.High, 1))
		held, err := fit.Traces(context.Background(), read(t, fill(text, "TTT", fmt.Sprint(u.Low, " s"))+block), []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		chi := func(a *fit.Answer) float64 { return a.ReducedChiSquare * float64(a.DegreesOfFreedom) }
		assert.InDelta(t, 1, chi(held)-chi(a), 0.2) // the sum is a parabola only nearly
	}
	assert.Positive(t, limits)
}

// Of two traces without errors each weighs by its own scatter: with nothing in
// common, fitted at once, they have the errors that they have alone.
func TestEachTraceHasItsOwnScatter(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "6 ms", "DETUNING", "417 Hz")
	asked := read(t, text+"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"0 Hz\"\nper = \"trace\"\n[unknown.time]\ndial = \"dephasing.y.time\"\nper = \"trace\"\n")
	one, two := noisy(t, asked, 1, 0.01, 1, 0), noisy(t, asked, 2, 0.2, 1, 0)
	one.Name, two.Name = "one", "two"
	both, err := fit.Traces(context.Background(), asked, []*experiment.Trace{one, two}, fit.TraceSettings{})
	require.NoError(t, err)
	for k, tr := range []*experiment.Trace{one, two} {
		alone, err := fit.Traces(context.Background(), asked, []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		for i, u := range alone.Unknowns {
			joint := both.Unknowns[2*i+k]
			assert.Equal(t, u.Name+"["+tr.Name+"]", joint.Name)
			assert.InEpsilon(t, u.Value, joint.Value, 1e-4)
			assert.InEpsilon(t, u.Error, joint.Error, 1e-2, joint.Name)
		}
	}
	for path, want := range map[string]float64{"drive.d.detuning": 417, "dephasing.y.time": 6e-3} {
		v, err := both.Fitted.Value(path)
		require.NoError(t, err)
		assert.Equal(t, want, v, "two values for one dial of the file: it stays")
	}
}

// A trace in recorded time, its rows in any order, finds the Rabi frequency and
// the lifetime of a driven atom from far away.
func TestRecordedTime(t *testing.T) {
	text := fill(atom, "DETUNING", "0 Hz", "LIFETIME", "LLL", "TIME", "1 s", "order = \"half wait half\"", "order = \"pulse\"", "rabi = \"10 kHz\"", "rabi = \"RRR\"",
		"[step.wait]", "[step.pulse]\non = [\"d\"]\nlasts = \"2 ms\"\n[step.wait]", "[readout]", "[record]\nsamples = 81\n[readout]")
	cut := strings.Index(text, "[scan.w]")
	text = text[:cut] + text[strings.Index(text, "[record]"):]
	out, err := experiment.Run(context.Background(), read(t, fill(text, "RRR", "3.1 kHz", "LLL", "0.7 ms")))
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(11, 1))
	tr := &experiment.Trace{Name: "t", File: "t.csv", Is: "value", Shows: "signal"}
	for _, i := range r.Perm(out.Rows()) {
		tr.Times = append(tr.Times, out.Column("time").Values[i])
		tr.Y = append(tr.Y, out.Column("signal").Values[i]+0.02*r.NormFloat64())
	}
	a, err := fit.Traces(context.Background(), read(t, fill(text, "RRR", "400 Hz", "LLL", "1 s")+"[unknown.rabi]\ndial = \"drive.d.rabi\"\n[unknown.lifetime]\ndial = \"decay.x.lifetime\"\n"), []*experiment.Trace{tr}, fit.TraceSettings{})
	require.NoError(t, err)
	for i, want := range []float64{3.1e3, 0.7e-3} {
		u := a.Unknowns[i]
		assert.InDelta(t, want, u.Value, 4*u.Error, u.Name)
		assert.Less(t, u.Error, 0.1*want)
	}
	assert.Empty(t, a.Warnings)
	assert.NotNil(t, a.Table().Column("time"))
}

// Residuals are judged along the axis, whatever the order of the rows; a bump
// among many small residuals shows in neighbours that are alike.
func TestResidualsAlongTheAxis(t *testing.T) {
	text := fill(atom, "LIFETIME", "1 s", "TIME", "6 ms", "DETUNING", "417 Hz")
	e := read(t, text+"[unknown.detuning]\ndial = \"drive.d.detuning\"\nlow = \"300 Hz\"\nhigh = \"500 Hz\"\n")
	said := func(change func(i int) float64) string {
		tr := noisy(t, e, 21, 0.02, 1, 0)
		for i := range tr.Y {
			tr.Y[i] += change(i)
		}
		r := rand.New(rand.NewPCG(21, 3))
		r.Shuffle(len(tr.Y), func(i, j int) {
			tr.Y[i], tr.Y[j] = tr.Y[j], tr.Y[i]
			tr.Points[i], tr.Points[j] = tr.Points[j], tr.Points[i]
		})
		a, err := fit.Traces(context.Background(), e, []*experiment.Trace{tr}, fit.TraceSettings{})
		require.NoError(t, err)
		return strings.Join(a.Warnings, "\n")
	}
	assert.Empty(t, said(func(int) float64 { return 0 }))
	assert.Contains(t, said(func(i int) float64 { return 0.15 * math.Exp(-math.Pow(float64(i-60)/1.5, 2)) }), "neighbours resemble one another")
	assert.Contains(t, said(func(i int) float64 { return 0.1 * math.Cos(float64(i)/4) }), "they keep their sign for long")
}
