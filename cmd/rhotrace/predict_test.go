package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"io"
	"math"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/experiment"
	"rhotrace/io/arrowfile"
	"rhotrace/io/table"
)

// TestOutputsAgree holds Arrow file, Arrow stream, CSV and JSON against what the
// library answers, bit for bit.
func TestOutputsAgree(t *testing.T) {
	workIn(t)
	e, err := experiment.ReadFile("fringe.toml")
	require.NoError(t, err)
	want, err := experiment.Run(t.Context(), e)
	require.NoError(t, err)

	status, _, errOut := invoke("", "predict", "fringe.toml", "-o", "a.arrow")
	require.Equal(t, done, status, errOut)
	file, err := os.Open("a.arrow")
	require.NoError(t, err)
	defer file.Close()
	saved, err := arrowfile.Read(file)
	require.NoError(t, err)
	assert.Equal(t, want, saved, "units, texts and record included")

	status, stream, errOut := invoke("", "predict", "fringe.toml", "-o", "-")
	require.Equal(t, done, status, errOut)
	streamed, err := arrowfile.Read(strings.NewReader(stream))
	require.NoError(t, err)
	assert.Equal(t, want, streamed)

	status, _, errOut = invoke("", "predict", "fringe.toml", "-o", "a.csv")
	require.Equal(t, done, status, errOut)
	text, err := os.ReadFile("a.csv")
	require.NoError(t, err)
	listed, err := table.ReadCSV(bytes.NewReader(text))
	require.NoError(t, err)
	require.Len(t, listed.Columns, len(want.Columns))
	for i, c := range want.Columns {
		assert.Equal(t, c.Name, listed.Columns[i].Name)
		assert.Equal(t, c.Values, listed.Columns[i].Values)
	}

	status, out, errOut := invoke("", "predict", "fringe.toml", "--json")
	require.Equal(t, done, status, errOut)
	var answer struct {
		Columns  map[string][]float64
		Warnings []string
	}
	require.NoError(t, json.Unmarshal([]byte(out), &answer))
	require.Len(t, answer.Columns, len(want.Columns))
	for _, c := range want.Columns {
		assert.Equal(t, c.Values, answer.Columns[c.Name])
	}
	assert.NotNil(t, answer.Warnings)
}

// TestTurnIsRecorded re-runs a turned experiment from the record in its file.
func TestTurnIsRecorded(t *testing.T) {
	workIn(t)
	status, _, errOut := invoke("", "predict", "fringe.toml", "-o", "a.arrow", "--turn", `drive.clock.rabi="25 kHz"`)
	require.Equal(t, done, status, errOut)
	text, err := os.ReadFile("a.arrow")
	require.NoError(t, err)
	saved, err := arrowfile.Read(bytes.NewReader(text))
	require.NoError(t, err)
	assert.Contains(t, saved.Meta[table.MetaExperiment], `rabi     = "25 kHz"`)
	status, stream, errOut := invoke(saved.Meta[table.MetaExperiment], "predict", "-", "-o", "-")
	require.Equal(t, done, status, errOut)
	again, err := arrowfile.Read(strings.NewReader(stream))
	require.NoError(t, err)
	assert.Equal(t, saved.Columns, again.Columns)
}

// TestPiPulse holds the whole command against the Rabi formula: on resonance a
// pulse of Ωt = π inverts, P = sin²(Ωt/2), for example C. J. Foot, Atomic
// Physics (2005), section 7.3.
func TestPiPulse(t *testing.T) {
	workIn(t)
	for lasts, want := range map[string]float64{"50 us": 1, "25 us": 0.5, "100 us": 0, "12.5 us": math.Pow(math.Sin(math.Pi/8), 2)} {
		status, out, errOut := invoke("", "predict", "--json", "pulse.toml", "--turn", "step.pulse.lasts="+lasts)
		require.Equal(t, done, status, errOut)
		var answer struct{ Columns map[string][]float64 }
		require.NoError(t, json.Unmarshal([]byte(out), &answer))
		assert.InDelta(t, want, answer.Columns["population.e"][0], 1e-8, lasts) // the accuracy asked for
	}
}

func TestFiguresHaveTheirFormat(t *testing.T) {
	workIn(t)
	for name, start := range map[string]string{"f.png": "\x89PNG\r\n", "f.svg": "<?xml", "f.PDF": "%PDF-"} {
		status, _, errOut := invoke("", "predict", "fringe.toml", "--figure", name)
		require.Equal(t, done, status, errOut)
		text, err := os.ReadFile(name)
		require.NoError(t, err)
		assert.True(t, bytes.HasPrefix(text, []byte(start)), name)
	}
	text, err := os.ReadFile("f.svg")
	require.NoError(t, err)
	assert.Contains(t, string(text), "Short fringe", "the title of the file")
}

// slow is an experiment that takes seconds.
const slow = `format = 1
[level.g]
[level.e]
[drive.a]
between = ["g", "e"]
rabi = "12.5 kHz"
[drive.b]
between = ["g", "e"]
rabi = "12.5 kHz"
detuning = "31.41 kHz"
[step.p]
on = ["a", "b"]
lasts = "4 ms"
[sequence]
order = "p"
[scan.x]
dial = "drive.a.detuning"
from = "0 Hz"
to = "50 kHz"
points = 1000000
[readout]
bright = "e"
`

func TestInterruption(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("slow.toml", []byte(slow), 0o644))
	require.NoError(t, os.WriteFile("out.csv", []byte("old\n"), 0o644))
	before := files(t)
	ctx, cancel := context.WithTimeout(t.Context(), 50*time.Millisecond)
	defer cancel()
	var out, errOut bytes.Buffer
	status := run(ctx, []string{"predict", "slow.toml", "-o", "out.csv", "--figure", "out.png"}, nil, &out, &errOut, noTerminal)
	assert.Equal(t, failed, status)
	assert.Equal(t, "rhotrace: interrupted; nothing was written\n", errOut.String())
	assert.Empty(t, out.String())
	assert.Equal(t, before, files(t))
	text, err := os.ReadFile("out.csv")
	require.NoError(t, err)
	assert.Equal(t, "old\n", string(text))
}

// TestInterruptionWhileReading stops though standard input never ends.
func TestInterruptionWhileReading(t *testing.T) {
	workIn(t)
	in, w := io.Pipe()
	defer w.Close()
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	var errOut bytes.Buffer
	assert.Equal(t, failed, run(ctx, []string{"predict", "-", "-o", "out.arrow"}, in, io.Discard, &errOut, noTerminal))
	assert.Equal(t, "rhotrace: interrupted; nothing was written\n", errOut.String())
}

func TestTerminal(t *testing.T) {
	workIn(t)
	terminal := func(any) bool { return true }
	before := files(t)
	var out, errOut bytes.Buffer
	status := run(t.Context(), []string{"predict", "fringe.toml", "-o", "-"}, nil, &out, &errOut, terminal)
	assert.Equal(t, mistook, status)
	assert.Equal(t, "rhotrace: -o -: Arrow is not written to a terminal; send it into a pipe or a file, or name one, as in -o out.arrow\n", errOut.String())
	assert.Empty(t, out.String())
	assert.Equal(t, before, files(t))

	errOut.Reset()
	status = run(t.Context(), []string{"predict", "fringe.toml"}, nil, &out, &errOut, terminal)
	assert.Equal(t, done, status)
	assert.Empty(t, errOut.String(), "a short run shows no progress")
	assert.Contains(t, out.String(), "Short fringe")
}

// broken fails to write.
type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, errors.New("the wire is cut") }

func TestBrokenStandardOutput(t *testing.T) {
	workIn(t)
	for _, args := range [][]string{
		{"predict", "fringe.toml"}, {"predict", "fringe.toml", "--json"}, {"predict", "fringe.toml", "-o", "-"},
		{"dials", "fringe.toml"}, {"dials", "fringe.toml", "--json"}, {"help"}, {"version"}, {"completion", "bash"},
	} {
		var errOut bytes.Buffer
		assert.Equal(t, failed, run(t.Context(), args, nil, broken{}, &errOut, noTerminal), "%v", args)
		assert.Equal(t, "rhotrace: standard output: cannot be written: the wire is cut; send it somewhere else\n", errOut.String(), "%v", args)
	}
}

func TestBrokenStandardInput(t *testing.T) {
	var errOut bytes.Buffer
	in := io.MultiReader(strings.NewReader("format = 1\n"), errorReader{})
	assert.Equal(t, failed, run(t.Context(), []string{"predict", "-"}, in, io.Discard, &errOut, noTerminal))
	assert.Equal(t, "rhotrace: standard input: cannot be read: the wire is cut\n", errOut.String())
}

type errorReader struct{}

func (errorReader) Read([]byte) (int, error) { return 0, errors.New("the wire is cut") }

// TestNoNumberInJSON: NaN and infinity have no form in JSON.
func TestNoNumberInJSON(t *testing.T) {
	b, err := json.Marshal([]number{number(math.NaN()), number(math.Inf(1)), number(math.Inf(-1)), -1e-300})
	require.NoError(t, err)
	assert.JSONEq(t, "[null, null, null, -1e-300]", string(b))
}

// BenchmarkFringeToArrow is a run of the command without the start of a process.
func BenchmarkFringeToArrow(b *testing.B) {
	workIn(b)
	for b.Loop() {
		if status, _, errOut := invoke("", "predict", "fringe.toml", "-o", "a.arrow"); status != done {
			b.Fatal(errOut)
		}
	}
}
