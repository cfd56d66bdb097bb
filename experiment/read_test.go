package experiment

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

const plain = `format = 1
[level.g]
[level.e]
[drive.clock]
between = ["g", "e"]
rabi = "10 kHz"
[decay.spont]
from = "e"
to = "g"
lifetime = "1 ms"
[step.half]
on = ["clock"]
area = "0.5 pi"
[step.dark]
lasts = "1 ms"
[sequence]
order = "half dark half"
[scan.wait]
dial = "step.dark.lasts"
from = "0 ms"
to = "1 ms"
points = 3
`

// Every mistake gets one message with the line, the place and what to do.
func TestMistakes(t *testing.T) {
	cases := []struct {
		name, old, new string
		line           int
		says           []string
	}{
		{"unknown key before missing one", `rabi = "10 kHz"`, `rabii = "10 kHz"`, 6, []string{"drive.clock.rabii", "unknown key", "rabi"}},
		{"unknown table", "[decay.spont]", "[decai.spont]", 7, []string{"decai", "decay"}},
		{"wrong dimension", `rabi = "10 kHz"`, `rabi = "10 us"`, 6, []string{"drive.clock.rabi", "frequency"}},
		{"missing unit", `rabi = "10 kHz"`, `rabi = 10`, 6, []string{"drive.clock.rabi", "unit"}},
		{"missing unit in text", `rabi = "10 kHz"`, `rabi = "10"`, 6, []string{"drive.clock.rabi", "Hz"}},
		{"negative frequency", `rabi = "10 kHz"`, `rabi = "-1 Hz"`, 6, []string{"drive.clock.rabi", "0 Hz or more"}},
		{"two rates", `lifetime = "1 ms"`, "lifetime = \"1 ms\"\nrate = \"3 /s\"", 11, []string{"rate", "exactly one", "lifetime"}},
		{"no rate", `lifetime = "1 ms"`, "", 7, []string{"decay.spont", "exactly one"}},
		{"rate as frequency", `lifetime = "1 ms"`, `rate = "6 MHz"`, 10, []string{"decay.spont.rate", "linewidth", "2π"}},
		{"negative rate", `lifetime = "1 ms"`, `rate = "-3 /s"`, 10, []string{"decay.spont.rate"}},
		{"infinite rabi", `rabi = "10 kHz"`, `rabi = "inf Hz"`, 6, []string{"drive.clock.rabi"}},
		{"nan", `lasts = "1 ms"`, `lasts = nan`, 15, []string{"step.dark.lasts"}},
		{"no such level", `from = "e"`, `from = "x"`, 8, []string{"decay.spont.from", `"x"`, "g, e"}},
		{"drive with one level", `["g", "e"]`, `["g", "g"]`, 5, []string{"drive.clock.between", "twice"}},
		{"no such step", `half dark half`, `half drak half`, 17, []string{"sequence.order", "drak", "dark"}},
		{"open bracket", `half dark half`, `half (dark half`, 17, []string{"sequence.order", "never closed"}},
		{"closing bracket", `half dark half`, `half dark) half`, 17, []string{"sequence.order", "no opening"}},
		{"millions of repeats", `half dark half`, `9000000*(half dark half)`, 17, []string{"sequence.order", "at most 10000000"}},
		{"empty order", `half dark half`, ` `, 17, []string{"sequence.order", "empty"}},
		{"count without key", `half dark half`, `k*(half dark)`, 17, []string{"sequence.order", "k = 8"}},
		{"zero points", `points = 3`, `points = 0`, 22, []string{"scan.wait.points", "2"}},
		{"no such dial", `dial = "step.dark.lasts"`, `dial = "step.drak.lasts"`, 19, []string{"step.drak.lasts", "step.dark.lasts"}},
		{"equal ends", `to = "1 ms"`, `to = "0 ms"`, 21, []string{"scan.wait.to"}},
		{"drive twice", `on = ["clock"]`, `on = ["clock", "clock"]`, 12, []string{"step.half.on", "twice"}},
		{"area without drive", `on = ["clock"]`, `on = []`, 13, []string{"step.half.area", "drive"}},
		{"name taken", "[decay.spont]", "[decay.clock]", 7, []string{"clock", "names of their own"}},
		{"name of a step key", "[decay.spont]", "[decay.area]", 7, []string{"area", "names of their own"}},
		{"format", `format = 1`, `format = 7`, 1, []string{"format", "reads format 1"}},
		{"populations", `[scan.wait]`, "[start]\npopulations = { g = 0.6, e = 0.5 }\n[scan.wait]", 19, []string{"start.populations", "sum to"}},
		{"weight of nothing", `[scan.wait]`, "[shift.z]\nweights = { }\n[scan.wait]", 19, []string{"shift.z.weights"}},
		{"rad/s", `rabi = "10 kHz"`, `rabi = "10 rad/s"`, 6, []string{"drive.clock.rabi", "Hz", "2π"}},
		{"readout of nothing", `[scan.wait]`, "[readout]\nshots = 3\n[scan.wait]", 18, []string{"readout", "exactly one"}},
		{"loss of zero", `order = "half dark half"`, "order = \"half dark half\"\ndead = \"-1 s\"", 18, []string{"sequence.dead"}},
		{"circle of dials", `[scan.wait]`, "[dial.a]\nturns = { \"dial.b.value\" = 1 }\nvalue = 1\n[dial.b]\nturns = { \"dial.a.value\" = 1 }\nvalue = 1\n[scan.wait]", 0, []string{"circle"}},
		{"zero rabi with an area", `rabi = "10 kHz"`, `rabi = "0 Hz"`, 13, []string{"step.half.area", "zero"}},
		{"joint decay of unequal frames", `[scan.wait]`, "[level.x]\n[decay.j]\npairs = { \"e:g\" = 1, \"x:g\" = 1 }\nrate = \"1 /s\"\n[scan.wait]", 20, []string{"decay.j.pairs", "different frequencies"}},
		{"energy without lab", `[level.e]`, "[level.e]\nenergy = \"1 MHz\"", 4, []string{"level.e.energy", "no effect", "lab"}},
		{"lab without energy", `rabi = "10 kHz"`, "rabi = \"10 kHz\"\nframe = \"lab\"", 2, []string{"level.g", "no energy"}},
		{"no such shape", `area = "0.5 pi"`, "area = \"0.5 pi\"\nlasts = \"1 us\"\nshape = \"gausian\"", 15, []string{"step.half.shape", "gaussian"}},
		{"shape without duration", `area = "0.5 pi"`, "area = \"0.5 pi\"\nshape = \"blackman\"", 11, []string{"step.half.lasts", "duration"}},
		{"shape without width", `area = "0.5 pi"`, "area = \"0.5 pi\"\nlasts = \"1 us\"\nshape = \"sech\"", 11, []string{"step.half.width", "missing"}},
		{"width of a square", `area = "0.5 pi"`, "area = \"0.5 pi\"\nlasts = \"1 us\"\nwidth = \"1 us\"", 15, []string{"step.half.width", "gaussian"}},
		{"waveform that is not there", `area = "0.5 pi"`, "area = \"0.5 pi\"\nlasts = \"1 us\"\nshape = \"table\"\nfile = \"nowhere.csv\"", 16, []string{"step.half.file", "nowhere.csv"}},
		{"linewidth in a loop", `[scan.wait]`, "[drive.two]\nbetween = [\"g\", \"e\"]\nrabi = \"1 Hz\"\nlinewidth = \"1 Hz\"\n[scan.wait]", 21, []string{"drive.two.linewidth", "loop"}},
	}
	_, err := Read("plain.toml", []byte(plain))
	require.NoError(t, err)
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			require.Contains(t, plain, c.old)
			_, err := Read("plain.toml", []byte(strings.Replace(plain, c.old, c.new, 1)))
			require.Error(t, err)
			place, ok := err.(*Error)
			require.True(t, ok, "%v", err)
			assert.Equal(t, c.line, place.Line, "%v", err)
			assert.Equal(t, "plain.toml", place.File)
			for _, s := range c.says {
				assert.Contains(t, err.Error(), s)
			}
			assert.NotContains(t, err.Error(), "\n")
		})
	}
}

func TestUnusedStepIsAWarning(t *testing.T) {
	e, err := Read("plain.toml", []byte(strings.Replace(plain, "half dark half", "dark", 1)))
	require.NoError(t, err)
	require.Len(t, e.Warnings(), 1)
	assert.Contains(t, e.Warnings()[0], "step.half")
}

func FuzzRead(f *testing.F) {
	f.Add(plain)
	f.Add(everything)
	f.Add(everything + readBoth)
	f.Add("")
	f.Add("format = 1")
	f.Fuzz(func(t *testing.T, text string) {
		e, err := Read("f.toml", []byte(text))
		if err != nil {
			return
		}
		// What reads must write itself and read again.
		if _, err := Read("f.toml", e.Text()); err != nil {
			t.Fatalf("%v\n%s", err, e.Text())
		}
	})
}

func FuzzOrder(f *testing.F) {
	for _, s := range []string{"half dark half", "8*(flip gap)", "n*(a 2*b) c", "((a))", "3*", "*(a)", "2*3*a", "9999999999*a"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		nodes, err := parseOrder(text, func(string) (int, error) { return 0, nil }, func(string) (field, error) { return 0, nil })
		if err == nil && len(nodes) == 0 {
			t.Fatal("an order without steps was accepted")
		}
	})
}
