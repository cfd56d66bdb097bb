package main

import (
	"bufio"
	"encoding/json"
	"math"
	"strconv"

	"rhotrace/io/table"
)

// writeJSON writes {"columns": {name: [numbers]}, "warnings": [texts]}, columns
// in the order of the table. Numbers have the fewest digits that read back to
// the same bits; NaN and infinity are null, since JSON has neither.
func writeJSON(w *bufio.Writer, t *table.Table) error {
	w.WriteString(`{"columns": {`)
	for i, c := range t.Columns {
		if i > 0 {
			w.WriteString(", ")
		}
		name, err := json.Marshal(c.Name)
		if err != nil {
			return err
		}
		w.Write(name)
		w.WriteString(": [")
		for k, v := range c.Values {
			if k > 0 {
				w.WriteString(", ")
			}
			w.Write(appendNumber(w.AvailableBuffer(), v))
		}
		w.WriteByte(']')
	}
	warnings, err := json.Marshal(append([]string{}, t.Warnings...))
	if err != nil {
		return err
	}
	w.WriteString(`}, "warnings": `)
	w.Write(warnings)
	_, err = w.WriteString("}\n")
	return err
}

func appendNumber(b []byte, v float64) []byte {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return append(b, "null"...)
	}
	return strconv.AppendFloat(b, v, 'g', -1, 64)
}

// number is a float64 whose JSON is null where JSON has no number for it.
type number float64

func (n number) MarshalJSON() ([]byte, error) { return appendNumber(nil, float64(n)), nil }

var _ json.Marshaler = number(0)
