// Package table holds the answer of a run: named columns of numbers with their
// units, and the record of how they were made. Files, figures and fits share it.
package table

import (
	"fmt"
	"strings"
)

// A Column is one named series of numbers.
type Column struct {
	Name   string    // for example "step.dark.lasts" or "population.e"
	Unit   string    // SI: "s", "Hz", "T", "W", "m", "rad", …; "1" for a number without dimension
	About  string    // what the column is, in words
	Values []float64 // one per row; NaN stands for a value that is missing
}

// A Table is a list of columns of equal length. The zero value is an empty table.
type Table struct {
	Columns []Column

	// Meta is the record of how the table was made; its keys are the Meta…
	// constants but MetaWarnings, and MetaFile followed by a name.
	Meta map[string]string

	// Warnings are the doubts that the run had about its own answer.
	Warnings []string
}

// Column returns the column of that name, or nil if there is none. The pointer
// is good until the next Add.
func (t *Table) Column(name string) *Column {
	for i := range t.Columns {
		if t.Columns[i].Name == name {
			return &t.Columns[i]
		}
	}
	return nil
}

// Rows returns the number of rows, 0 for a table without columns.
func (t *Table) Rows() int {
	if len(t.Columns) == 0 {
		return 0
	}
	return len(t.Columns[0].Values)
}

// Add appends a column. It keeps values, it does not copy them. It panics if
// the table has columns of another length.
func (t *Table) Add(name, unit, about string, values []float64) {
	if len(t.Columns) > 0 && len(values) != t.Rows() {
		panic(fmt.Sprintf("table: column %q has %d values in a table of %d rows", name, len(values), t.Rows()))
	}
	t.Columns = append(t.Columns, Column{Name: name, Unit: unit, About: about, Values: values})
}

// Check returns an error if two columns have one name, if a name has a line
// break, if the lengths of columns differ, or if the warnings stand in Meta as well. What writes a table calls it.
func (t *Table) Check() error {
	seen := make(map[string]bool, len(t.Columns))
	for _, c := range t.Columns {
		if seen[c.Name] {
			return fmt.Errorf("table: two columns are named %q; every column needs a name of its own", c.Name)
		}
		seen[c.Name] = true
		if strings.ContainsAny(c.Name, "\r\n") {
			return fmt.Errorf("table: the name of column %q has a line break; take it out", c.Name)
		}
		if len(c.Values) != t.Rows() {
			return fmt.Errorf("table: column %q has %d rows, column %q has %d; all must have the same number",
				c.Name, len(c.Values), t.Columns[0].Name, t.Rows())
		}
	}
	if _, twice := t.Meta[MetaWarnings]; twice {
		return fmt.Errorf("table: Meta holds %q; warnings belong in Warnings", MetaWarnings)
	}
	return nil
}
