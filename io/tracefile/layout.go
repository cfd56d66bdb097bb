package tracefile

import (
	"math"
	"strconv"
	"strings"
)

// layout is how the cells of a file are parted and how decimals are written.
type layout struct {
	separator byte // 0: any number of blanks
	decimal   byte
}

func (l layout) String() string {
	between := map[byte]string{',': "commas", ';': "semicolons", '\t': "tabs", 0: "blanks"}[l.separator]
	mark := map[byte]string{'.': "a point", ',': "a comma"}[l.decimal]
	return "columns stand between " + between + ", decimals follow " + mark
}

// layouts lists what is tried. A comma never does both.
var layouts = []layout{{';', '.'}, {';', ','}, {'\t', '.'}, {'\t', ','}, {',', '.'}, {0, '.'}, {0, ','}}

// sampled is how many rows decide on the layout.
const sampled = 200

// findLayout takes the layout in which the most of the first rows hold nothing
// but numbers; of several the one with the most rows of equal length, then the
// one with the most columns. Rows that may be remarks count only where there are
// no others.
func findLayout(rows []row, doubtful []int) layout {
	var sample []row
	for i := 0; i < len(rows) && len(sample) < sampled; i++ {
		if len(doubtful) > 0 && doubtful[0] == i {
			doubtful = doubtful[1:]
			continue
		}
		sample = append(sample, rows[i])
	}
	if len(sample) == 0 {
		sample = rows[:min(len(rows), sampled)]
	}
	best, most := layout{',', '.'}, fit{}
	for _, l := range layouts {
		if f := l.fits(sample); f.better(most) {
			best, most = l, f
		}
	}
	// Whole numbers do not show the decimal mark; the rest of the file may.
	comma := layout{best.separator, ','}
	if best.separator != ',' && best.decimal == '.' && comma.fits(sample) == most && showsComma(rows) {
		return comma
	}
	return best
}

// fit counts rows of numbers, those of the commonest length, and their cells.
type fit struct{ rows, equal, width int }

func (f fit) better(g fit) bool {
	switch {
	case f.rows != g.rows:
		return f.rows > g.rows
	case f.equal != g.equal:
		return f.equal > g.equal
	}
	return f.width > g.width
}

func (l layout) fits(rows []row) (f fit) {
	lengths := map[int]int{}
	var cells []string
	for _, r := range rows {
		cells = stripped(l.cells(cells[:0], r.text))
		// A comma between two numbers parts columns, if nothing else does.
		if l.allNumbers(cells) && (len(cells) > 1 || l.decimal == '.') {
			f.rows++
			lengths[len(cells)]++
		}
	}
	for width, count := range lengths {
		if g := (fit{f.rows, count, width}); g.better(f) {
			f = g
		}
	}
	return f
}

// showsComma reports whether a row below the first, which may be a header, has
// a comma and none has a point.
func showsComma(rows []row) bool {
	comma := false
	for _, r := range rows[1:] {
		if strings.IndexByte(r.text, '.') >= 0 {
			return false
		}
		comma = comma || strings.IndexByte(r.text, ',') >= 0
	}
	return comma
}

// allNumbers reports whether every cell can be read as a number or a missing
// one, and at least one is a number.
func (l layout) allNumbers(cells []string) bool {
	numbers := 0
	for _, c := range cells {
		v, ok := parseNumber(c, l.decimal)
		if !ok {
			return false
		}
		if !math.IsNaN(v) {
			numbers++
		}
	}
	return numbers > 0
}

// stripped leaves out empty cells at the end, which trailing separators make.
func stripped(cells []string) []string {
	for len(cells) > 0 && cells[len(cells)-1] == "" {
		cells = cells[:len(cells)-1]
	}
	return cells
}

// cells cuts a line and appends its cells to dst. Separators in double quotes do
// not cut, and two quotes inside quotes are one (RFC 4180).
func (l layout) cells(dst []string, text string) []string {
	if strings.IndexByte(text, '"') >= 0 {
		return l.quotedCells(dst, text)
	}
	if l.separator == 0 {
		for {
			text = strings.TrimLeft(text, blanks)
			if text == "" {
				return dst
			}
			end := strings.IndexAny(text, blanks)
			if end < 0 {
				return append(dst, text)
			}
			dst, text = append(dst, text[:end]), text[end:]
		}
	}
	for {
		end := strings.IndexByte(text, l.separator)
		if end < 0 {
			return append(dst, trimmed(text))
		}
		dst, text = append(dst, trimmed(text[:end])), text[end+1:]
	}
}

const blanks = " \t\v\f"

// trimmed is strings.TrimSpace; most cells need none.
func trimmed(cell string) string {
	if n := len(cell); n > 0 && cell[0] > ' ' && cell[0] < 0x80 && cell[n-1] > ' ' && cell[n-1] < 0x80 {
		return cell
	}
	return strings.TrimSpace(cell)
}

func (l layout) quotedCells(dst []string, text string) []string {
	var b strings.Builder
	inside, started := false, false
	finish := func() {
		cell := strings.TrimSpace(b.String())
		if started || l.separator != 0 {
			dst = append(dst, cell)
		}
		b.Reset()
		started = false
	}
	for i := 0; i < len(text); i++ {
		c := text[i]
		cuts := c == l.separator || l.separator == 0 && strings.IndexByte(blanks, c) >= 0
		switch {
		case c == '"' && inside && i+1 < len(text) && text[i+1] == '"':
			b.WriteByte(c)
			i++
		case c == '"':
			inside, started = !inside, true
		case cuts && !inside:
			finish()
		default:
			b.WriteByte(c)
			started = true
		}
	}
	finish()
	return dst
}

// parseNumber reads a cell; NaN is one that says that nothing was measured.
func parseNumber(cell string, decimal byte) (float64, bool) {
	number := cell
	if decimal == ',' {
		if strings.IndexByte(cell, '.') >= 0 {
			return 0, false
		}
		if comma := strings.IndexByte(cell, ','); comma >= 0 {
			if comma == len(cell)-1 {
				return 0, false
			}
			number = cell[:comma] + "." + cell[comma+1:]
		}
	}
	if v, err := strconv.ParseFloat(number, 64); err == nil {
		return v, strings.IndexByte(number, 'x') < 0 && strings.IndexByte(number, 'X') < 0
	}
	switch strings.ToLower(cell) {
	case "", "na", "n/a", "null", "none", "-", "--":
		return math.NaN(), true
	}
	if minus, found := strings.CutPrefix(number, "−"); found && minus != "" && minus[0] >= '0' && minus[0] <= '9' {
		return parseNumber("-"+minus, '.')
	}
	return 0, false
}
