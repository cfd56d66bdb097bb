package table_test

import (
	"testing"

	"rhotrace/io/table"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func TestColumns(t *testing.T) {
	var tb table.Table
	assert.Equal(t, 0, tb.Rows())
	assert.Nil(t, tb.Column("time"))
	tb.Add("time", "s", "time since the start", []float64{0, 1e-3, 2e-3})
	tb.Add("signal", "1", "bright probability", []float64{1, 0.5, 0})
	assert.Equal(t, 3, tb.Rows())
	require.NotNil(t, tb.Column("signal"))
	assert.Equal(t, "1", tb.Column("signal").Unit)
	assert.Equal(t, "bright probability", tb.Column("signal").About)
	assert.Nil(t, tb.Column("Signal"), "names are compared exactly")
	assert.PanicsWithValue(t, `table: column "short" has 2 values in a table of 3 rows`,
		func() { tb.Add("short", "1", "", []float64{1, 2}) })
	assert.NoError(t, tb.Check())
}

func TestCheck(t *testing.T) {
	for name, c := range map[string]struct {
		table table.Table
		want  string
	}{
		"name":  {table.Table{Columns: []table.Column{{Name: "time"}, {Name: "time"}}}, `two columns are named "time"`},
		"break": {table.Table{Columns: []table.Column{{Name: "time\nsignal"}}}, `"time\nsignal" has a line break`},
		"length": {table.Table{Columns: []table.Column{{Name: "time", Values: []float64{1}}, {Name: "signal"}}},
			`column "signal" has 0 rows, column "time" has 1`},
		"meta": {table.Table{Meta: map[string]string{table.MetaWarnings: "[]"}}, "warnings belong in Warnings"},
	} {
		t.Run(name, func(t *testing.T) { assert.ErrorContains(t, c.table.Check(), c.want) })
	}
}

func TestRecord(t *testing.T) {
	tb := table.Table{
		Meta:     map[string]string{table.MetaVersion: "1", table.MetaFile + "a.csv": "x,y\n"},
		Warnings: []string{`the trace "drifts"`, "1 % lies outside"},
	}
	record := tb.Record()
	assert.Equal(t, `["the trace \"drifts\"","1 % lies outside"]`, record[table.MetaWarnings])
	assert.Equal(t, "1", record[table.MetaVersion])
	assert.NotContains(t, tb.Meta, table.MetaWarnings)

	var back table.Table
	require.NoError(t, back.SetRecord(record))
	assert.Equal(t, tb, back)

	var empty table.Table
	assert.Equal(t, map[string]string{table.MetaWarnings: "[]"}, empty.Record())
	require.NoError(t, back.SetRecord(empty.Record()))
	assert.Equal(t, empty, back)

	err := back.SetRecord(map[string]string{table.MetaWarnings: "{"})
	assert.ErrorContains(t, err, "rhotrace.warnings is not a JSON list of strings")
}
