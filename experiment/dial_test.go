package experiment

import (
	"context"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// everything is an experiment that uses every kind of dial, beside the shipped
// examples.
const everything = `
format = 1
[level.g]
[level.e]
[level.m]
[level.o]
[drive.clock]
between = ["g", "e"]
rabi = "10 kHz"
detuning = "1 kHz"
phase = "10 deg"
linewidth = "20 Hz"
[drive.many]
pairs = { "g:m" = 1.0, "m:o" = 0.7 }
rabi = "4 kHz"
detuning = "300 Hz"
[decay.one]
from = "e"
to = { g = 0.7, m = 0.3 }
lifetime = "2 ms"
[decay.two]
pairs = { "m:g" = 1.0, "o:m" = 0.5 }
rate = "200 /s"
[decay.three]
from = "o"
to = "g"
linewidth = "30 Hz"
reverse = 0.2
[dephasing.a]
weights = { e = 1.0, m = -0.5 }
time = "3 ms"
[dephasing.b]
weights = { o = 1.0 }
rate = "40 /s"
[dephasing.c]
weights = { e = 0.3 }
linewidth = "12 Hz"
[shift.z]
weights = { e = 1.0, m = 0.4 }
size = "100 Hz"
[dial.field]
turns = { "shift.z.size" = ["1 kHz/G", "0.2 kHz/G^2"], "drive.many.rabi" = "0.5 kHz/G" }
value = "0.1 G"
[dial.power]
turns = { "drive.clock.rabi" = 0.3 }
relative = true
value = 0.05
[step.one]
on = ["clock", "many"]
lasts = "40 us"
[step.one.clock]
phase = "20 deg"
detuning = "200 Hz"
scale = 0.9
[step.one.z]
size = "50 Hz"
[step.one.one]
rate = "100 /s"
[step.one.a]
rate = "70 /s"
[step.area]
on = ["many"]
area = "0.3 pi"
[step.both]
on = ["clock"]
area = "0.4 pi"
lasts = "15 us"
[step.kick]
on = ["clock"]
area = "0.2 pi"
lasts = "0 s"
[sequence]
order = "kick n*(one area) both"
n = 3
[start]
populations = { g = 0.6, e = 0.3, m = 0.1 }
phases = { g = "0 deg", e = "40 deg" }
[spread.s]
dial = "drive.clock.detuning"
sigma = "500 Hz"
[record]
coherences = "all"
`

// shaped uses every kind of course.
const shaped = `format = 1
[level.g]
[level.e]
[level.r]
[drive.a]
between = ["g","e"]
rabi = "10 MHz"
[drive.b]
between = ["e","r"]
rabi = "10 MHz"
[decay.x]
from="e"
to="g"
linewidth="0.1 MHz"
[shift.z]
weights={e=1}
[step.p]
on = ["b","a"]
lasts = "1 us"
shape = "gaussian"
width = "200 ns"
area="6 pi"
[step.p.a]
shape="sech"
width = "100 ns"
centre = "600 ns"
chirp="2 MHz"
[step.p.z]
size="1 MHz"
shape="blackman"
[step.q]
on=["a"]
lasts="500 ns"
rise="100 ns"
fall="50 ns"
area="1 pi"
[step.w]
on=["b"]
lasts="300 ns"
shape="sine-squared"
[sequence]
order="p q w"
[scan.d]
dial="drive.a.detuning"
from="-2 MHz"
to="2 MHz"
points=5
[readout]
bright="r"
[record]
coherences="all"
`

// bareDrive has a drive without rotating-wave approximation.
const bareDrive = `
format = 1
[level.g]
energy = "0.3 MHz"
[level.e]
energy = "10.3 MHz"
[drive.d]
between = ["g", "e"]
rabi = "2 MHz"
detuning = "0.1 MHz"
phase = "20 deg"
frame = "lab"
[decay.x]
from = "e"
to = "g"
rate = "0.1 /us"
[step.p]
on = ["d"]
lasts = "700 ns"
[step.q]
on = ["d"]
lasts = "300 ns"
shape = "sine-squared"
[step.q.d]
phase = "30 deg"
detuning = "0.3 MHz"
[step.w]
lasts = "50 ns"
[sequence]
order = "p w q"
[readout]
bright = "e"
[record]
coherences = "all"
`

const readBoth = `
[readout]
bright = { e = 0.9, m = 0.2 }
among = ["g", "e", "m"]
sd = 0.1
shots = 100
false-bright = 0.02
false-dark = 0.03
`

const readAxis = `
[readout]
coherence = { "g:e" = 1.0, "g:m" = 0.5 }
phase = "30 deg"
sd = 0.2
shots = 50
`

func examples(t testing.TB) map[string]*Experiment {
	t.Helper()
	out := map[string]*Experiment{}
	files, err := filepath.Glob("../examples/*/*.toml")
	require.NoError(t, err)
	require.NotEmpty(t, files)
	for _, f := range files {
		e, err := ReadFile(f)
		require.NoError(t, err, f)
		out[filepath.Base(filepath.Dir(f))+"/"+filepath.Base(f)] = e
	}
	for name, text := range map[string]string{"everything": everything, "shaped": shaped, "bare": bareDrive, "bright": everything + readBoth, "axis": everything + readAxis,
		"photons": everything + "\n[readout]\nemission = [\"one\", \"two\"]\nduring = \"one\"\n",
		"rate":    everything + "\n[readout]\nemission = [\"one\", \"two\", \"three\"]\n"} {
		e, err := Read(name+".toml", []byte(text))
		require.NoError(t, err, name)
		out[name] = e
	}
	return out
}

// few keeps the first and last row of every scan, for speed.
func few(e *Experiment) *Experiment {
	s := *e.shape
	s.scans = nil
	for _, sc := range e.shape.scans {
		c := *sc
		c.rows = [][]float64{sc.rows[0], sc.rows[len(sc.rows)/3], sc.rows[len(sc.rows)-1]}
		s.scans = append(s.scans, &c)
	}
	s.record.samples = min(s.record.samples, 5)
	return &Experiment{shape: &s, values: e.values}
}

// kindOf is the path of a dial with the user's names as *.
func kindOf(path string) string {
	parts, _ := splitKey(path)
	switch parts[0] {
	case "start", "readout":
		if len(parts) == 3 {
			parts[2] = "*"
		}
	case "sequence":
		if parts[1] != "dead" {
			parts[1] = "*"
		}
	default:
		parts[1] = "*"
		if len(parts) == 4 {
			if parts[0] == "step" {
				parts[2] = "*"
			} else {
				parts[3] = "*"
			}
		}
	}
	return strings.Join(parts, ".")
}

// inert dials do not reach the table of predict: dead time counts in plans and
// drifts, scale and offset turn measured traces.
var inert = map[string]bool{"sequence.dead": true, "trace.*.scale": true, "trace.*.offset": true, "trace.*.shots": true}

// A dial that turns nothing is a defect: every kind of dial must move a number
// of some table by more than rounding.
func TestEveryKindOfDialMovesAResult(t *testing.T) {
	moved := map[string]float64{}
	for name, whole := range examples(t) {
		e := few(whole)
		before, err := Run(context.Background(), e)
		require.NoError(t, err, name)
		for i, d := range e.Dials() {
			kind := kindOf(d.Path)
			moved[kind] += 0
			scanned := false
			for _, s := range e.shape.scans {
				for _, f := range s.dials {
					scanned = scanned || int(f) == i
				}
			}
			if moved[kind] > 1e-6 || scanned {
				continue
			}
			v := e.values[i]
			next := v*1.25 + d.step()
			if d.check(next) != "" {
				next = v * 0.75
			}
			if d.Whole {
				next = v + 1
			}
			turned, err := e.With(Turn{d.Path, next})
			require.NoError(t, err, "%s: %s", name, d.Path)
			after, err := Run(context.Background(), turned)
			require.NoError(t, err, "%s: %s", name, d.Path)
			for c := range before.Columns {
				for r, y := range before.Columns[c].Values {
					scale := math.Max(1, math.Abs(y))
					moved[kind] = math.Max(moved[kind], math.Abs(after.Columns[c].Values[r]-y)/scale)
				}
			}
		}
	}
	for kind, by := range moved {
		if inert[kind] {
			assert.Zero(t, by, "%s is listed as inert", kind)
		} else {
			assert.Greater(t, by, 1e-6, "%s moves nothing", kind)
		}
	}
	assert.Greater(t, len(moved), 30)
}

// step is a change of the dial that an experiment would notice.
func (d *Dial) step() float64 {
	switch d.Unit {
	case "Hz":
		return 1000
	case "s":
		return 1e-6
	case "rad":
		return 0.3
	case "T":
		return 1e-5
	}
	return 0.05
}

// The file in a result's metadata gives the same table again, bit for bit, also
// after dials were turned by With (as a fit does) or by Edit (as --turn does).
func TestResultRunsAgainFromItsMetadata(t *testing.T) {
	ctx := context.Background()
	for name, whole := range examples(t) {
		e := few(whole)
		again := func(e *Experiment, what string, exact bool) {
			t.Helper()
			first, err := Run(ctx, e)
			require.NoError(t, err, "%s %s", name, what)
			text := first.Meta["rhotrace.experiment"]
			read, err := Read(name, []byte(text))
			require.NoError(t, err, "%s %s\n%s", name, what, text)
			second, err := Run(ctx, few(read))
			require.NoError(t, err)
			require.Equal(t, len(first.Columns), len(second.Columns))
			for c := range first.Columns {
				if exact {
					assert.Equal(t, first.Columns[c], second.Columns[c], "%s %s", name, what)
					continue
				}
				for r, y := range first.Columns[c].Values {
					assert.InDelta(t, y, second.Columns[c].Values[r], 1e-12*math.Max(1, math.Abs(y)), "%s %s", name, what)
				}
			}
			if exact {
				assert.Equal(t, text, second.Meta["rhotrace.experiment"])
			}
		}
		again(e, "as read", true)
		for _, d := range e.Dials() {
			v, err := e.Value(d.Path)
			require.NoError(t, err)
			next := v*1.1 + d.step()/7
			if d.Whole {
				next = v + 1
			}
			if d.check(next) != "" {
				continue
			}
			turned, err := e.With(Turn{d.Path, next})
			if err != nil {
				continue // the others leave less than nothing
			}
			// An area that is rewritten so that an amplitude stays is a product
			// that rounds once more; everything else comes back bit for bit.
			exact := !strings.HasSuffix(d.Path, ".rabi") && !strings.HasSuffix(d.Path, ".scale") &&
				!strings.HasPrefix(d.Path, "dial.") && d.Path != "step.both.lasts" && !strings.HasPrefix(d.Path, "step.p.") && !strings.HasPrefix(d.Path, "step.q.")
			again(turned, d.Path, exact)
		}
	}
}

// With leaves the duration of a pulse given by its area alone, as a pulse
// generator does; Edit lets it follow, as if the file had said so.
func TestAreaFixesTheDurationOnce(t *testing.T) {
	e, err := ReadFile("../examples/ramsey/experiment.toml")
	require.NoError(t, err)
	half := func(e *Experiment) float64 {
		l, err := newLayout(e, nil, nil)
		require.NoError(t, err)
		v := l.newEvaluator()
		require.NoError(t, v.settler.settle(e.values, none, nil))
		v.fill(0, -1, v.settler.x)
		return v.stretches[0].Lasts
	}
	// A quarter turn at 12.5 kHz takes 1/(4 · 12.5 kHz) = 20 µs.
	assert.InEpsilon(t, 20e-6, half(e), 1e-14)
	turned, err := e.With(Turn{"drive.clock.rabi", 25e3})
	require.NoError(t, err)
	assert.InEpsilon(t, 20e-6, half(turned), 1e-14)
	read, err := Read("x.toml", turned.Text())
	require.NoError(t, err)
	assert.InEpsilon(t, 20e-6, half(read), 1e-14)
	edited, err := e.Edit(Turn{"drive.clock.rabi", 25e3})
	require.NoError(t, err)
	assert.InEpsilon(t, 10e-6, half(edited), 1e-14)
	longer, err := e.With(Turn{"step.half.area", math.Pi})
	require.NoError(t, err)
	assert.InEpsilon(t, 40e-6, half(longer), 1e-14)
}

// Slopes from the duals agree with central differences of whole runs, for every
// free dial of every example.
func TestSlopesAgainstDifferences(t *testing.T) {
	ctx := context.Background()
	for name, e := range examples(t) {
		if e.shape.readout == nil {
			continue
		}
		scanned := map[string]bool{} // the points set these
		for _, f := range e.points().dials {
			scanned[e.shape.dials[f].Path] = true
		}
		var free []string
		for _, d := range e.Dials() {
			v, _ := e.Value(d.Path)
			if !d.Whole && !scanned[d.Path] && !inert[kindOf(d.Path)] && !math.IsInf(v, 0) && d.check(v*(1+1e-4)+d.step()*1e-4) == "" && d.check(v*(1-1e-4)-d.step()*1e-4) == "" {
				free = append(free, d.Path)
			}
		}
		points := e.points()
		var dials []string
		for _, f := range points.dials {
			dials = append(dials, e.shape.dials[f].Path)
		}
		rows := [][]float64{points.rows[0], points.rows[len(points.rows)/2]}
		p, err := NewPredictor(e, Request{Dials: dials, Points: rows, Free: free})
		require.NoError(t, err, name)
		base := make([]float64, len(free))
		for j, path := range free {
			base[j], _ = e.Value(path)
		}
		y := make([]float64, len(rows))
		dy := grid(len(free), len(rows))
		require.NoError(t, p.Evaluate(ctx, base, y, dy), name)
		for j, path := range free {
			d, _ := e.Dial(path)
			h := math.Abs(base[j])*1e-4 + d.step()*1e-5
			difference := func(h float64) []float64 {
				up, down := append([]float64(nil), base...), append([]float64(nil), base...)
				up[j] += h
				down[j] -= h
				yu, yd := make([]float64, len(rows)), make([]float64, len(rows))
				require.NoError(t, p.Evaluate(ctx, up, yu, nil))
				require.NoError(t, p.Evaluate(ctx, down, yd, nil))
				for i := range yu {
					yu[i] = (yu[i] - yd[i]) / (2 * h)
				}
				return yu
			}
			coarse, fine := difference(2*h), difference(h)
			for i := range rows {
				want := (4*fine[i] - coarse[i]) / 3 // error of order h⁴
				scale := math.Max(math.Abs(want), math.Max(1, math.Abs(y[i]))/math.Max(math.Abs(base[j]), d.step()))
				assert.InDelta(t, want, dy[j][i], 2e-6*scale, "%s: %s at row %d", name, path, i)
			}
		}
	}
}

// The answer has the same bits for any number of workers.
func TestWorkersDoNotChangeTheAnswer(t *testing.T) {
	for name, e := range examples(t) {
		e = few(e)
		one, err := RunWith(context.Background(), e, Settings{Workers: 1})
		require.NoError(t, err, name)
		many, err := RunWith(context.Background(), e, Settings{Workers: 7})
		require.NoError(t, err, name)
		assert.Equal(t, one, many, name)
	}
}

// What has no place in the text is inserted where it belongs, whatever the
// layout of the file: comments, line ends and order stay.
func TestTextInsertsWhatTheFileLeftOut(t *testing.T) {
	for name, drive := range map[string]string{
		"header":       "[drive.clock] # remark\nbetween = [\"g\", \"e\"]\nrabi = \"10 kHz\"\n",
		"braces":       "[drive]\nclock = { between = [\"g\", \"e\"], rabi = \"10 kHz\" }\n",
		"dotted":       "[drive]\nclock.between = [\"g\", \"e\"]\nclock.rabi = \"10 kHz\"\n",
		"end of lines": "[drive.clock]\r\nbetween = [\"g\", \"e\"]\r\nrabi = \"10 kHz\"\r\n",
	} {
		text := strings.Replace(plain, "[drive.clock]\nbetween = [\"g\", \"e\"]\nrabi = \"10 kHz\"\n", drive, 1)
		for _, mark := range []string{"", "\ufeff"} {
			e, err := Read("x.toml", []byte(mark+text))
			require.NoError(t, err, name)
			turned, err := e.With(Turn{"drive.clock.phase", 0.5}, Turn{"drive.clock.detuning", 1e3}, Turn{"step.half.clock.scale", 0.7})
			require.NoError(t, err, name)
			again, err := Read("x.toml", turned.Text())
			require.NoError(t, err, "%s\n%s", name, turned.Text())
			for _, path := range []string{"drive.clock.phase", "drive.clock.detuning", "step.half.clock.scale"} {
				want, _ := turned.Value(path)
				got, err := again.Value(path)
				require.NoError(t, err)
				assert.Equal(t, want, got, "%s: %s", name, path)
			}
		}
	}
}
