package experiment

import (
	"fmt"
	"strings"
)

// Error is something wrong in an experiment file: where it stands and what to
// do about it.
type Error struct {
	File string
	Line int    // from 1; 0 when no line is to blame
	Path string // dotted key; empty for the file as a whole
	What string // what is wrong and what to do
}

func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d", e.Line)
	}
	b.WriteString(": ")
	if e.Path != "" {
		b.WriteString(e.Path + ": ")
	}
	return b.String() + e.What
}

// didYouMean names the nearest known words, or lists all when they are few.
func didYouMean(word string, known []string) string {
	if near := nearest(word, known); len(near) > 0 {
		return fmt.Sprintf("; did you mean %s?", orList(near))
	}
	switch {
	case len(known) == 0:
		return ""
	case len(known) <= 12:
		return "; known here: " + strings.Join(known, ", ")
	}
	return ""
}

// orList joins words as "a, b or c".
func orList(words []string) string {
	if n := len(words); n > 1 {
		return strings.Join(words[:n-1], ", ") + " or " + words[n-1]
	}
	return strings.Join(words, "")
}
