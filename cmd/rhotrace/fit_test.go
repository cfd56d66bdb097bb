package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/experiment"
	"rhotrace/io/arrowfile"
	"rhotrace/io/table"
)

// relaxing is an atom that decays, with a trace of columns ms, y to be fitted.
const relaxing = `format = 1
[level.g]
[level.e]
[decay.spont]
from = "e"
to = "g"
lifetime = "300 ms"
[step.wait]
lasts = "1 ms"
[sequence]
order = "wait"
[start]
populations = { e = 1.0 }
[readout]
bright = "e"
[trace.t]
x = { "step.wait.lasts" = "ms" }
x-unit = "ms"
y = "y"
y-is = "value"
[unknown.lifetime]
dial = "decay.spont.lifetime"
[unknown.scale]
dial = "trace.t.scale"
`

// relaxation writes 3 exp(−t/τ) with a ripple that no decay follows.
func relaxation(t *testing.T, name string, tau float64) {
	var b strings.Builder
	b.WriteString("ms,y\n")
	for i := range 40 {
		fmt.Fprintf(&b, "%g,%g\n", float64(i)/4, 3*math.Exp(-float64(i)/4/tau)+0.02*math.Cos(2.4*float64(i*i)))
	}
	require.NoError(t, os.WriteFile(name, []byte(b.String()), 0o644))
}

type fitAnswer struct {
	Unknowns []struct {
		Name, Dial, Unit        string
		Value, Error, Low, High *float64
	}
	Correlation [][]*float64
	ChiSquare   *float64 `json:"reduced_chi_square"`
	Freedom     *int     `json:"degrees_of_freedom"`
	Warnings    []string
}

func fitted(t *testing.T, args ...string) (a fitAnswer) {
	status, out, errOut := invoke("", append([]string{"fit", "--json"}, args...)...)
	require.Equal(t, done, status, errOut)
	d := json.NewDecoder(strings.NewReader(out))
	d.DisallowUnknownFields()
	require.NoError(t, d.Decode(&a))
	assert.False(t, d.More(), "one object and nothing else")
	return a
}

// TestFit holds numbers, table and saved experiment against the 2.2 ms that the
// trace was made with.
func TestFit(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("x.toml", []byte(relaxing), 0o644))
	relaxation(t, "a.csv", 2.2)
	a := fitted(t, "x.toml", "a.csv", "-o", "f.arrow", "--figure", "f.png", "--save", "found.toml")
	require.Len(t, a.Unknowns, 2)
	u := a.Unknowns[0]
	assert.Equal(t, []string{"lifetime", "decay.spont.lifetime", "s"}, []string{u.Name, u.Dial, u.Unit})
	assert.InDelta(t, 2.2e-3, *u.Value, 4**u.Error)
	assert.Less(t, *u.Error, 0.05e-3)
	assert.Less(t, *u.Low, *u.Value)
	assert.Greater(t, *u.High, *u.Value)
	require.Len(t, a.Correlation, 2)
	assert.Equal(t, 1.0, *a.Correlation[1][1])
	assert.Equal(t, *a.Correlation[0][1], *a.Correlation[1][0])
	assert.Equal(t, 38, *a.Freedom)
	assert.InDelta(t, 0.0002, *a.ChiSquare, 0.0001, "mean square of the ripple")
	assert.NotNil(t, a.Warnings)

	text, err := os.ReadFile("f.arrow")
	require.NoError(t, err)
	saved, err := arrowfile.Read(bytes.NewReader(text))
	require.NoError(t, err)
	var names []string
	for _, c := range saved.Columns {
		names = append(names, c.Name)
	}
	assert.Equal(t, []string{"step.wait.lasts", "data", "data.error", "model", "residual"}, names)
	for i, r := range saved.Column("residual").Values {
		assert.InDelta(t, saved.Column("data").Values[i]-saved.Column("model").Values[i], r, 1e-15)
	}
	assert.Contains(t, saved.Meta[table.MetaExperiment], "lifetime = \"")

	found, err := experiment.ReadFile("found.toml")
	require.NoError(t, err)
	v, err := found.Value("decay.spont.lifetime")
	require.NoError(t, err)
	assert.Equal(t, *u.Value, v)
	again := fitted(t, "found.toml", "a.csv", "-o", "f.csv")
	assert.InEpsilon(t, *u.Value, *again.Unknowns[0].Value, 1e-6)

	turned := fitted(t, "x.toml", "a.csv", "--turn", "decay.spont.lifetime=1 us")
	assert.InEpsilon(t, *u.Value, *turned.Unknowns[0].Value, 1e-6)
}

// TestFitTable reads what people read.
func TestFitTable(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("x.toml", []byte(relaxing), 0o644))
	relaxation(t, "a.csv", 2.2)
	relaxation(t, "long.csv", 1e9)
	status, out, errOut := invoke("", "fit", "x.toml", "a.csv")
	require.Equal(t, done, status, errOut)
	assert.Regexp(t, `(?m)^lifetime +2\.[12]\d*\(\d+\) ms +decay\.spont\.lifetime$`, out)
	assert.Regexp(t, `(?m)^ +scale +-0\.\d\d +1\.00$`, out)
	assert.Contains(t, out, "38 degrees of freedom")
	status, out, errOut = invoke("", "fit", "x.toml", "long.csv")
	require.Equal(t, done, status, errOut)
	assert.Contains(t, errOut, "warning: lifetime is not constrained")
	assert.Contains(t, errOut, "longer than about")
	assert.Regexp(t, `lifetime +> [\d.]+ m?s \(68 %\)`, out)
}

// TestFitWithoutNumbers prints null where there is no number.
func TestFitWithoutNumbers(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("x.toml", []byte(relaxing), 0o644))
	require.NoError(t, os.WriteFile("one.csv", []byte("ms,y\n1,2\n"), 0o644))
	a := fitted(t, "x.toml", "one.csv")
	assert.Nil(t, a.ChiSquare)
	assert.Nil(t, a.Unknowns[0].Error)
	assert.Nil(t, a.Correlation[0][1])
	assert.NotNil(t, a.Unknowns[0].Value)
	assert.NotEmpty(t, a.Warnings)
}

// TestFitRefuses gives status 2, the place, and writes nothing.
func TestFitRefuses(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("x.toml", []byte(relaxing), 0o644))
	relaxation(t, "a.csv", 2.2)
	require.NoError(t, os.WriteFile("scanned.toml", []byte(strings.Replace(relaxing, `"decay.spont.lifetime"`, `"step.wait.lasts"`, 1)), 0o644))
	require.NoError(t, os.WriteFile("at.toml", []byte(strings.Replace(relaxing, `y = "y"`, "y = \"y\"\nat = { \"decay.spont.lifetime\" = \"1 s\" }", 1)), 0o644))
	require.NoError(t, os.WriteFile("known.toml", []byte(relaxing[:strings.Index(relaxing, "[unknown")]), 0o644))
	require.NoError(t, os.WriteFile("words.csv", []byte("ms,y\n1,many\n"), 0o644))
	before := files(t)
	for _, c := range []struct {
		args []string
		says string
	}{
		{[]string{"x.toml"}, "there is no measured trace"},
		{[]string{"known.toml", "a.csv"}, "there is nothing to fit"},
		{[]string{"scanned.toml", "a.csv"}, "is what trace a.csv scans"},
		{[]string{"at.toml", "a.csv"}, "is fixed by at in trace a.csv"},
		{[]string{"x.toml", "words.csv"}, "words.csv:2"},
		{[]string{"x.toml", "none.csv"}, "none.csv: cannot be read"},
		{[]string{"x.toml", "a.csv", "-o", "-"}, "the table of a fit goes into a file"},
		{[]string{"x.toml", "a.csv", "-o", "a.csv"}, "would be overwritten"},
		{[]string{"x.toml", "a.csv", "--save", "x.toml"}, "would be overwritten"},
		{[]string{"x.toml", "a.csv", "-o", "b.csv", "--save", "c.csv"}, "--save c.csv"},
	} {
		status, out, errOut := invoke("", append([]string{"fit"}, c.args...)...)
		assert.Equal(t, mistook, status, c.args)
		assert.Contains(t, errOut, c.says)
		assert.Empty(t, out)
	}
	assert.Equal(t, before, files(t))
}
