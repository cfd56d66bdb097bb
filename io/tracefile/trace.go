// Package tracefile reads measured traces: tables of numbers in text files, as
// spreadsheets, oscilloscopes and scripts write them. Columns stand between
// commas, semicolons, tabs or blanks, decimals follow a point or a comma, lines
// end in any way, and there may be a header, a row of units and remarks. How a
// file was read is said in words with it.
package tracefile

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strconv"
	"strings"

	"rhotrace/io/spelling"
)

// Trace is a table of numbers from a text file.
type Trace struct {
	Name    string   // of the file, as messages give it
	Columns []Column // of equal length
	Lines   []int    // line in the file of each row, from 1
	Remarks []string // how the file was read, a sentence each
	Text    []byte   // the file, converted to UTF-8 where it was in another code; reading it gives the same rows
}

// Column is one series of numbers. Where the file gives no name, its number
// from 1 is the name. NaN stands for a cell that is empty or says that nothing
// was measured (nan, NA, n/a, null, none, -).
type Column struct {
	Name   string
	Values []float64
}

// largest bounds what is read into memory.
const largest = 1 << 29

// ReadFile reads the trace in the file at path. Errors name the file, the line
// and the column, and what to do.
func ReadFile(path string) (*Trace, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, unreadable(path, err)
	}
	defer f.Close()
	if info, err := f.Stat(); err == nil && info.IsDir() {
		return nil, fmt.Errorf("%s: is a directory; name the file with the trace", path)
	}
	return Read(path, f)
}

// Read reads a trace from r; name stands for the file in messages.
func Read(name string, r io.Reader) (*Trace, error) {
	raw, err := io.ReadAll(io.LimitReader(r, largest+1))
	switch {
	case err != nil:
		return nil, unreadable(name, err)
	case len(raw) > largest:
		return nil, fmt.Errorf("%s: is larger than %d MB; give a file with the columns that are needed", name, largest>>20)
	}
	t := &Trace{Name: name}
	if err := t.decode(raw); err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	sheet := t.lines()
	if len(sheet.rows) == 0 {
		return nil, fmt.Errorf("%s: has no rows of numbers%s; a trace needs at least one", name, sheet.instead(len(raw)))
	}
	if err := t.fill(sheet); err != nil {
		return nil, err
	}
	return t, nil
}

// unreadable words what the system says.
func unreadable(name string, err error) error {
	advice := "check the file and the disk"
	switch {
	case errors.Is(err, fs.ErrNotExist):
		advice = "check the name and the folder"
	case errors.Is(err, fs.ErrPermission):
		advice = "check the permissions"
	}
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err // the name is said already
	}
	return fmt.Errorf("%s: cannot be read: %w; %s", name, err, advice)
}

// Column finds a column by its name or, where none has that name, by its number
// from 1. An error gives the names that there are, near ones first.
func (t *Trace) Column(name string) (*Column, error) {
	var found []int
	names := make([]string, len(t.Columns))
	for i, c := range t.Columns {
		names[i] = c.Name
		if c.Name == name {
			found = append(found, i)
		}
	}
	switch n, err := strconv.Atoi(name); {
	case len(found) == 1:
		return &t.Columns[found[0]], nil
	case len(found) > 1:
		return nil, fmt.Errorf("%s: columns %d and %d are both named %q; give the number instead of the name", t.Name, found[0]+1, found[1]+1, name)
	case err == nil && n >= 1 && n <= len(t.Columns):
		return &t.Columns[n-1], nil
	}
	hint := ""
	if near := spelling.Near(name, names); len(near) > 0 {
		hint = "; did you mean " + quotedList(near, " or ") + "?"
	}
	more := ""
	if len(names) > 12 {
		names, more = names[:12], fmt.Sprintf(" and %d more", len(names)-12)
	}
	return nil, fmt.Errorf("%s: has no column %q%s; its columns are %s%s", t.Name, name, hint, quotedList(names, ", "), more)
}

func quotedList(words []string, between string) string {
	quoted := make([]string, len(words))
	for i, w := range words {
		quoted[i] = strconv.Quote(w)
	}
	return strings.Join(quoted, between)
}

func (t *Trace) remark(format string, args ...any) {
	t.Remarks = append(t.Remarks, fmt.Sprintf(format, args...))
}
