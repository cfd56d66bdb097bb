package main

import (
	"math"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/experiment"
	"rhotrace/io/figure"
)

// overlay draws measured traces over the prediction of an experiment.
func overlay(t *testing.T, text string, files ...string) (*figure.Figure, error) {
	e, err := experiment.Read("fringe.toml", []byte(text))
	require.NoError(t, err)
	traces, err := measured(e, files)
	require.NoError(t, err)
	answer, err := experiment.Run(t.Context(), e)
	require.NoError(t, err)
	return draw(t.Context(), e, answer, traces)
}

func fringe(t *testing.T) string {
	text, err := os.ReadFile("fringe.toml")
	require.NoError(t, err)
	return string(text)
}

func TestOverlay(t *testing.T) {
	workIn(t)
	f, err := overlay(t, fringe(t), "evening.csv")
	require.NoError(t, err)
	assert.Equal(t, "Short fringe", f.Title)
	require.Len(t, f.Panels, 1)
	require.Len(t, f.Panels[0].Lines, 1)
	assert.Equal(t, "predicted", f.Panels[0].Lines[0].Label)
	require.Len(t, f.Panels[0].Points, 1)
	p := f.Panels[0].Points[0]
	assert.Equal(t, "evening.csv", p.Label)
	assert.Equal(t, []float64{0, 0.625e-3, 1.25e-3}, p.X)
	assert.Equal(t, []float64{0.98, 0.51, 0.06}, p.Y)
	// 100 shots each, from the readout; near the middle √(p(1−p)/n).
	assert.InDelta(t, math.Sqrt(0.51*0.49/100), p.Error[1], 1e-3)
}

// TestOverlayScale undoes scale and offset of a trace, and turns counts into
// fractions.
func TestOverlayScale(t *testing.T) {
	workIn(t)
	f, err := overlay(t, fringe(t)+"scale = 0.5\noffset = 0.01\n", "evening.csv")
	require.NoError(t, err)
	assert.InDeltaSlice(t, []float64{1.94, 1, 0.1}, f.Panels[0].Points[0].Y, 1e-12)

	require.NoError(t, os.WriteFile("counts.csv", []byte("wait_ms,bright\n0,49\n1.25,3\n"), 0o644))
	f, err = overlay(t, fringe(t)+"y-is = \"counts\"\nshots = 50\n", "counts.csv")
	require.NoError(t, err)
	p := f.Panels[0].Points[0]
	assert.InDeltaSlice(t, []float64{0.98, 0.06}, p.Y, 1e-12)
	assert.InDelta(t, math.Sqrt(0.06*0.94/50), p.Error[1], 5e-3)

	_, err = overlay(t, fringe(t)+"scale = 0.0\n", "evening.csv")
	assert.EqualError(t, err, "trace.any.scale is 0, so the measured trace says nothing of the prediction; give it another value")
}

// TestOverlayAt draws a curve for each trace where one was taken at another
// value of a dial: at a last phase of 180° the fringe is upside down.
func TestOverlayAt(t *testing.T) {
	workIn(t)
	text := fringe(t)
	text = text[:strings.Index(text, "[trace.any]")] + `
[step.last]
on   = ["clock"]
area = "0.5 pi"
[step.last.clock]
phase = "0 deg"
[trace.one]
file = "evening.csv"
x = "wait_ms"
x-unit = "ms"
y = "bright"
[trace.two]
file = "morning.csv"
x = "wait_ms"
x-unit = "ms"
y = "bright"
at = { "step.last.clock.phase" = "180 deg" }
`
	text = strings.Replace(text, "half dark half", "half dark last", 1)
	require.NoError(t, os.WriteFile("morning.csv", []byte("wait_ms,bright\n0,0.02\n1.25,0.95\n"), 0o644))
	f, err := overlay(t, text, "./evening.csv", "morning.csv")
	require.NoError(t, err)
	panel := f.Panels[0]
	require.Len(t, panel.Lines, 2)
	require.Len(t, panel.Points, 2)
	assert.Equal(t, "predicted for one", panel.Lines[0].Label)
	assert.Equal(t, "predicted for two", panel.Lines[1].Label)
	assert.Greater(t, panel.Lines[0].Y[0], 0.99)
	assert.Less(t, panel.Lines[1].Y[0], 0.01)
}

// TestOverlayPairs refuses what cannot be laid over one set of curves.
func TestOverlayPairs(t *testing.T) {
	workIn(t)
	text := fringe(t)
	_, err := overlay(t, strings.Replace(text, `x      = "wait_ms"`+"\n"+`x-unit = "ms"`, `x = { time = "wait_ms" }`+"\n"+`x-unit = "ms"`, 1), "evening.csv")
	require.Error(t, err)
	assert.Equal(t, mistook, status(err))
	assert.Contains(t, err.Error(), "the trace lies along time, which the file does not scan")

	require.NoError(t, os.WriteFile("two.csv", []byte("wait_ms,det_Hz,bright\n0,100,0.2\n1,200,0.3\n"), 0o644))
	both := strings.Replace(text, `x      = "wait_ms"`+"\n"+`x-unit = "ms"`,
		`x = { "step.dark.lasts" = "wait_ms", "drive.clock.detuning" = "det_Hz" }`+"\n"+`x-unit = { "step.dark.lasts" = "ms", "drive.clock.detuning" = "Hz" }`, 1)
	_, err = overlay(t, both, "two.csv")
	require.Error(t, err)
	assert.Equal(t, mistook, status(err))
	assert.Contains(t, err.Error(), "the rows differ in step.dark.lasts and in drive.clock.detuning")
}
