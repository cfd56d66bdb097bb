package table_test

import (
	"bytes"
	"encoding/csv"
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"rhotrace/io/table"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func TestWriteCSV(t *testing.T) {
	var tb table.Table
	tb.Add("step.dark.lasts", "s", "", []float64{0, 3e-6, 0.1})
	tb.Add(`level "e", upper`, "1", "", []float64{1, math.NaN(), math.Copysign(0, -1)})
	tb.Warnings = []string{"not for the CSV file"}
	var out bytes.Buffer
	require.NoError(t, tb.WriteCSV(&out))
	// Quoting of the second name: RFC 4180, section 2, rules 6 and 7.
	assert.Equal(t, "step.dark.lasts,\"level \"\"e\"\", upper\"\n0,1\n3e-06,NaN\n0.1,-0\n", out.String())
}

// TestCSVSameBits writes random bit patterns and the edges of the format
// (IEEE 754 binary64: smallest subnormal, smallest normal, largest, infinities,
// negative zero), and reads them with the standard library's reader alone.
func TestCSVSameBits(t *testing.T) {
	values := []float64{0, math.Copysign(0, -1), math.SmallestNonzeroFloat64, 0x1p-1022, math.MaxFloat64,
		math.Inf(1), math.Inf(-1), 3e-6, 0.1, 1.0 / 3, math.Pi, 1e21, 1e22, 9007199254740993}
	random := rand.New(rand.NewPCG(1, 2))
	for len(values) < 5000 {
		if v := math.Float64frombits(random.Uint64()); !math.IsNaN(v) {
			values = append(values, v)
		}
	}
	var tb table.Table
	tb.Add("x", "1", "", values)
	tb.Add("#y", "1", "", values)
	var out bytes.Buffer
	require.NoError(t, tb.WriteCSV(&out))

	rows, err := csv.NewReader(bytes.NewReader(out.Bytes())).ReadAll()
	require.NoError(t, err)
	require.Equal(t, []string{"x", "#y"}, rows[0])
	require.Len(t, rows, len(values)+1)

	back, err := table.ReadCSV(&out)
	require.NoError(t, err)
	for i, v := range values {
		require.Equal(t, math.Float64bits(v), math.Float64bits(back.Columns[0].Values[i]), "row %d: %v", i, v)
		require.Equal(t, math.Float64bits(v), math.Float64bits(back.Columns[1].Values[i]), "row %d: %v", i, v)
	}
}

func TestReadCSV(t *testing.T) {
	tb, err := table.ReadCSV(strings.NewReader("# invented data\nx,y\n# remark\n1, 2\r\n3,NaN\n"))
	require.NoError(t, err)
	assert.Equal(t, []float64{1, 3}, tb.Column("x").Values)
	assert.Equal(t, 2.0, tb.Column("y").Values[0])
	assert.True(t, math.IsNaN(tb.Column("y").Values[1]))

	for text, want := range map[string]string{
		"":                 "empty",
		"x,x\n1,2\n":       `two columns are named "x"`,
		"x,y\n1,2\n3,oh\n": `line 3, column "y": "oh" is no number`,
		"x,y\n1,2\n3\n":    "record on line 3: wrong number of fields",
		"x\n1e999\n":       `line 2, column "x": "1e999"`,
		"\"x\n":            "reading CSV",
	} {
		_, err := table.ReadCSV(strings.NewReader(text))
		assert.ErrorContains(t, err, want, "%q", text)
	}
}

// full is a disk without room.
type full struct{}

func (full) Write([]byte) (int, error) { return 0, errors.New("no space left") }

func TestWriteCSVFails(t *testing.T) {
	var tb table.Table
	assert.ErrorContains(t, tb.WriteCSV(&bytes.Buffer{}), "the table has none")
	tb.Add("x", "1", "", make([]float64, 100000))
	assert.ErrorContains(t, tb.WriteCSV(full{}), "no space left")
	tb.Columns = append(tb.Columns, table.Column{Name: "x"})
	assert.ErrorContains(t, tb.WriteCSV(&bytes.Buffer{}), "two columns")
}

// FuzzCSV: any text is read or refused, never a panic; what was read comes back
// the same from what is written.
func FuzzCSV(f *testing.F) {
	f.Add("x,y\n1,2\n")
	f.Add("\"a\"\"b\",\"#\"\n# remark\n-0,NaN\n")
	f.Add("\"\"\n1\n")
	f.Fuzz(func(t *testing.T, text string) {
		first, err := table.ReadCSV(strings.NewReader(text))
		if err != nil {
			return
		}
		var out bytes.Buffer
		require.NoError(t, first.WriteCSV(&out))
		second, err := table.ReadCSV(bytes.NewReader(out.Bytes()))
		require.NoError(t, err)
		var again bytes.Buffer
		require.NoError(t, second.WriteCSV(&again))
		require.Equal(t, out.String(), again.String())
		require.Equal(t, first.Rows(), second.Rows())
	})
}
