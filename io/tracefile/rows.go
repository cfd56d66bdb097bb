package tracefile

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// fill reads the header and the rows of a sheet into columns.
func (t *Trace) fill(s *sheet) error {
	t.remark("%s", s.layout)
	if len(s.remarks) > 0 {
		t.remark("%s left out as remarks", countOf(len(s.remarks), "line was", "lines were"))
	}
	names, rows, err := t.header(s)
	if err != nil {
		return err
	}
	first := s.layout.cells(nil, rows[0].text)
	width := len(names) // the most cells a row may have
	if names == nil {
		width = len(first)
	}
	columns := make([][]float64, width)
	for i := range columns {
		columns[i] = make([]float64, 0, len(rows))
	}
	t.Lines = make([]int, 0, len(rows))
	used := len(stripped(slices.Clone(names))) // columns that have a name or a value
	shortest, shortestLine := math.MaxInt, 0
	var blank lineList
	var cells []string
	for _, r := range rows {
		cells = s.layout.cells(cells[:0], r.text)
		filled := len(stripped(cells))
		switch {
		case filled == 0:
			blank.add(r.line)
			continue
		case filled > width:
			return t.ragged(s, r.line, filled, width)
		case len(cells) < shortest:
			shortest, shortestLine = len(cells), r.line
		}
		used = max(used, filled)
		for i := range columns {
			v := math.NaN()
			if i < filled {
				var ok bool
				if v, ok = parseNumber(cells[i], s.layout.decimal); !ok {
					return t.noNumber(r.line, i, names, cells[i])
				}
			}
			columns[i] = append(columns[i], v)
		}
		t.Lines = append(t.Lines, r.line)
	}
	switch {
	case len(t.Lines) == 0:
		return fmt.Errorf("%s: has no rows of numbers (all cells are empty); a trace needs at least one", t.Name)
	case shortest < used:
		return t.ragged(s, shortestLine, shortest, used)
	}
	for i := range used {
		name := strconv.Itoa(i + 1)
		if i < len(names) && names[i] != "" {
			name = names[i]
		}
		t.Columns = append(t.Columns, Column{Name: name, Values: columns[i]})
	}
	if blank.count > 0 {
		t.remark("%s left out: all cells are empty (%s)", countOf(blank.count, "row was", "rows were"), blank.String())
	}
	if missing := t.missing(); missing.count > 0 {
		t.remark("%s no finite number in some cell (%s) and cannot be used where that column is", countOf(missing.count, "row has", "rows have"), missing.String())
	}
	return nil
}

// missing lists the rows without a finite number in some column.
func (t *Trace) missing() (list lineList) {
	for i, line := range t.Lines {
		for _, c := range t.Columns {
			if v := c.Values[i]; math.IsNaN(v) || math.IsInf(v, 0) {
				list.add(line)
				break
			}
		}
	}
	return list
}

func (t *Trace) ragged(s *sheet, line, cells, columns int) error {
	return fmt.Errorf("%s:%d: has %s, the table has %s (%s); complete the line, or put # in front to leave it out",
		t.Name, line, countOf(cells, "cell", "cells"), countOf(columns, "column", "columns"), s.layout)
}

func (t *Trace) noNumber(line, column int, names []string, cell string) error {
	where := fmt.Sprintf("column %d", column+1)
	if column < len(names) && names[column] != "" {
		where += fmt.Sprintf(" (%q)", names[column])
	}
	return fmt.Errorf("%s:%d: %s: %q is not a number; correct it, or put # in front of the line to leave it out", t.Name, line, where, clip(cell))
}

// header finds the names of the columns, nil if the file gives none, and the
// rows below. A first row is a header unless it begins with a number; names may
// also stand in the remark right above the numbers, as some programs write it.
func (t *Trace) header(s *sheet) (names []string, rows []row, err error) {
	first := s.layout.cells(nil, s.rows[0].text)
	if startsWithNumber(first, s.layout) || s.layout.allNumbers(stripped(first)) {
		if above := s.layout.cells(nil, s.above()); len(above) > 1 && len(above) == len(stripped(first)) && !s.layout.anyNumber(above) {
			t.remark("the names of the columns stand in the remark above the numbers: %s", quotedList(above, ", "))
			return above, s.rows, nil
		}
		t.remark("there is no header: the columns are called 1 to %d", len(stripped(first)))
		return nil, s.rows, nil
	}
	rows = s.rows[1:]
	if len(rows) > 1 {
		units, below := s.layout.cells(nil, rows[0].text), s.layout.cells(nil, rows[1].text)
		if len(stripped(units)) > 0 && !s.layout.anyNumber(units) && s.layout.allNumbers(stripped(below)) && !s.layout.allMissing(units) {
			t.remark("line %d was taken for units and left out: %s", rows[0].line, strings.TrimSpace(rows[0].text))
			rows = rows[1:]
		}
	}
	if len(rows) == 0 {
		return nil, nil, fmt.Errorf("%s: has no rows of numbers (only line %d, %s); a trace needs at least one",
			t.Name, s.rows[0].line, strconv.Quote(clip(strings.TrimSpace(s.rows[0].text))))
	}
	if s.layout.separator == 0 {
		columns := len(s.layout.cells(nil, rows[0].text))
		if wide := wideGap.Split(strings.TrimSpace(s.rows[0].text), -1); len(first) != columns && len(wide) == columns {
			first = wide
		}
		if len(first) != columns {
			return nil, nil, fmt.Errorf("%s:%d: the header has %s, the row below has %s; put names with blanks in double quotes",
				t.Name, s.rows[0].line, countOf(len(first), "name", "names"), countOf(columns, "cell", "cells"))
		}
	}
	t.remark("the names of the columns stand in line %d", s.rows[0].line)
	return first, rows, nil
}

// wideGap parts names with single blanks in them.
var wideGap = regexp.MustCompile(`\t+| {2,}`)

func startsWithNumber(cells []string, l layout) bool {
	if len(cells) == 0 {
		return false
	}
	v, ok := parseNumber(cells[0], l.decimal)
	return ok && !math.IsNaN(v)
}

func (l layout) anyNumber(cells []string) bool {
	for _, c := range cells {
		if v, ok := parseNumber(c, l.decimal); ok && !math.IsNaN(v) {
			return true
		}
	}
	return false
}

func (l layout) allMissing(cells []string) bool {
	for _, c := range cells {
		if v, ok := parseNumber(c, l.decimal); !ok || !math.IsNaN(v) {
			return false
		}
	}
	return true
}

func clip(text string) string {
	if len(text) > 60 {
		return strings.ToValidUTF8(text[:60], "") + "…"
	}
	return text
}

func countOf(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + many
}

// lineList counts lines and shows the first few.
type lineList struct {
	count int
	shown []int
}

func (l *lineList) add(line int) {
	if l.count++; len(l.shown) < 10 {
		l.shown = append(l.shown, line)
	}
}

func (l *lineList) String() string {
	words := make([]string, len(l.shown))
	for i, n := range l.shown {
		words[i] = strconv.Itoa(n)
	}
	text := "line "
	if l.count > 1 {
		text = "lines "
	}
	text += strings.Join(words, ", ")
	if l.count > len(words) {
		text += ", …"
	}
	return text
}
