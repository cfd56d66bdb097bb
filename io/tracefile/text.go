package tracefile

import (
	"bytes"
	"errors"
	"slices"
	"strings"
	"unicode/utf16"
	"unicode/utf8"
)

// decode makes UTF-8 of the bytes of a file; a binary file is an error. What is
// neither UTF-8 nor marked as UTF-16 is taken for Latin-1, where every byte is a
// sign: numbers read the same, and names at worst get a wrong letter.
func (t *Trace) decode(raw []byte) error {
	text := raw
	if bytes.HasPrefix(raw, []byte{0xff, 0xfe}) || bytes.HasPrefix(raw, []byte{0xfe, 0xff}) {
		t.remark("the text is UTF-16")
		text = decodeUTF16(raw)
	}
	for _, c := range bytes.TrimRight(text, endMark) {
		if c < ' ' && c != '\t' && c != '\n' && c != '\r' && c != '\v' && c != '\f' {
			return errors.New("is binary, not text; save the trace as CSV")
		}
	}
	if !utf8.Valid(text) {
		t.remark("the text is not UTF-8 and was read as Latin-1")
		runes := make([]rune, len(text))
		for i, c := range text {
			runes[i] = rune(c)
		}
		text = []byte(string(runes))
	}
	t.Text = text
	return nil
}

// endMark ends some text files written by old programs.
const endMark = "\x1a"

// decodeUTF16 follows the mark at the start and leaves it out.
func decodeUTF16(raw []byte) []byte {
	low, high := 0, 1
	if raw[0] == 0xfe {
		low, high = 1, 0
	}
	units := make([]uint16, 0, len(raw)/2)
	for i := 2; i+1 < len(raw); i += 2 {
		units = append(units, uint16(raw[i+low])|uint16(raw[i+high])<<8)
	}
	return []byte(string(utf16.Decode(units)))
}

// row is a line that holds cells.
type row struct {
	line int // from 1
	text string
}

// sheet is a file cut into lines.
type sheet struct {
	rows    []row
	remarks []row // in the order of their lines
	layout  layout
}

// lines cuts the text at LF, CR LF or CR alone and sorts out remarks.
func (t *Trace) lines() *sheet {
	text := strings.TrimRight(strings.TrimPrefix(string(t.Text), "\ufeff"), endMark)
	s := &sheet{rows: make([]row, 0, strings.Count(text, "\n")+1)}
	var doubtful []int // rows that begin with a semicolon
	for line := 1; text != ""; line++ {
		var one string
		one, text = cutLine(text)
		switch body := strings.TrimSpace(one); {
		case body == "":
		case body[0] == '#' || body[0] == '%' || strings.HasPrefix(body, "//"):
			s.remarks = append(s.remarks, row{line, body})
		default:
			if body[0] == ';' {
				doubtful = append(doubtful, len(s.rows))
			}
			s.rows = append(s.rows, row{line, one})
		}
	}
	s.layout = findLayout(s.rows, doubtful)
	s.dropRemarks(doubtful)
	return s
}

func cutLine(text string) (line, rest string) {
	end := strings.IndexByte(text, '\n')
	if end < 0 {
		end = len(text)
	}
	if cr := strings.IndexByte(text[:end], '\r'); cr >= 0 {
		end = cr
	}
	line, rest = text[:end], text[end:]
	if strings.HasPrefix(rest, "\r\n") {
		return line, rest[2:]
	}
	return line, rest[min(1, len(rest)):]
}

// dropRemarks moves rows that begin with a semicolon to the remarks: all, unless
// cells stand between semicolons; then those with nothing but words behind it.
func (s *sheet) dropRemarks(doubtful []int) {
	kept := s.rows[:0]
	for i, r := range s.rows {
		if len(doubtful) > 0 && doubtful[0] == i {
			doubtful = doubtful[1:]
			words := strings.TrimLeft(strings.TrimSpace(r.text), "; \t")
			_, isNumber := parseNumber(words, s.layout.decimal)
			if s.layout.separator != ';' || words != "" && !isNumber && !strings.Contains(words, ";") {
				s.remarks = append(s.remarks, r)
				continue
			}
		}
		kept = append(kept, r)
	}
	s.rows = kept
	slices.SortStableFunc(s.remarks, func(a, b row) int { return a.line - b.line })
}

// above is the last remark above the rows, without its mark.
func (s *sheet) above() string {
	text := ""
	for _, r := range s.remarks {
		if r.line > s.rows[0].line {
			break
		}
		text = r.text
	}
	return strings.TrimSpace(strings.TrimLeft(strings.TrimSpace(text), "#%/;"))
}

// instead says what a file without rows has.
func (s *sheet) instead(size int) string {
	switch {
	case size == 0:
		return " (it is empty)"
	case len(s.remarks) > 0:
		return " (it has only remarks)"
	}
	return " (it has only blank lines)"
}
