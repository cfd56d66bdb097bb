package table

import (
	"bufio"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
)

// WriteCSV writes one header line with the names of the columns, then a line
// for every row. Units and metadata are left out. Numbers have the fewest digits
// that read back to the same bits ("NaN", "+Inf" and "-Inf" where that is what
// they are); names are quoted as RFC 4180 says, and lines end in "\n".
func (t *Table) WriteCSV(w io.Writer) error {
	if err := t.Check(); err != nil {
		return err
	}
	if len(t.Columns) == 0 {
		return errors.New("table: a CSV file needs at least one column, the table has none")
	}
	out := bufio.NewWriterSize(w, 1<<16)
	for i, c := range t.Columns {
		if i > 0 {
			out.WriteByte(',')
		}
		out.WriteString(quoted(c.Name))
	}
	out.WriteByte('\n')
	var line []byte
	for row := range t.Rows() {
		line = line[:0]
		for i := range t.Columns {
			if i > 0 {
				line = append(line, ',')
			}
			line = strconv.AppendFloat(line, t.Columns[i].Values[row], 'g', -1, 64)
		}
		line = append(line, '\n')
		if _, err := out.Write(line); err != nil {
			return fmt.Errorf("table: writing CSV: %w", err)
		}
	}
	if err := out.Flush(); err != nil {
		return fmt.Errorf("table: writing CSV: %w", err)
	}
	return nil
}

// quoted puts a name in quotation marks where it would be misread without:
// "#" at the start of a line marks a remark, an empty line is skipped.
func quoted(name string) string {
	if name != "" && name[0] != '#' && name == strings.TrimSpace(name) && !strings.ContainsAny(name, ",\"") {
		return name
	}
	return `"` + strings.ReplaceAll(name, `"`, `""`) + `"`
}

// ReadCSV reads what WriteCSV writes: a header line, then numbers. Lines that
// begin with # are remarks. Units and metadata stay empty. An error names the
// line and the column.
func ReadCSV(r io.Reader) (*Table, error) {
	in := csv.NewReader(r)
	in.Comment = '#'
	in.ReuseRecord = true
	names, err := in.Read()
	if errors.Is(err, io.EOF) {
		return nil, errors.New("table: the CSV file is empty; its first line must name the columns")
	}
	if err != nil {
		return nil, fmt.Errorf("table: reading CSV: %w", err)
	}
	t := &Table{Columns: make([]Column, len(names))}
	for i, name := range names {
		t.Columns[i].Name = strings.Clone(name)
	}
	if err := t.Check(); err != nil {
		return nil, err
	}
	for {
		cells, err := in.Read()
		if errors.Is(err, io.EOF) {
			return t, nil
		}
		if err != nil {
			return nil, fmt.Errorf("table: reading CSV: %w", err)
		}
		for i, cell := range cells {
			value, err := strconv.ParseFloat(strings.TrimSpace(cell), 64)
			if err != nil {
				line, _ := in.FieldPos(i)
				return nil, fmt.Errorf("table: line %d, column %q: %q is no number that fits 64 bits", line, t.Columns[i].Name, cell)
			}
			t.Columns[i].Values = append(t.Columns[i].Values, value)
		}
	}
}
