package experiment

import (
	"bytes"
	"errors"
	"fmt"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2/unstable"
)

// nodeKind says what stands behind a key of a TOML file.
type nodeKind int

const (
	tableNode nodeKind = iota // tables in braces too
	stringNode
	integerNode
	floatNode
	boolNode
	arrayNode
	dateNode // dates and times of all kinds
)

// node is one entry of the tree that a TOML file makes, with its place. Children
// stand in the order of their first appearance; [a.b], b = {…} and a.b.c = …
// lead to the same tree.
type node struct {
	key, path  string // last part, decoded; whole key as joinKey writes it. An element of an array has its array's
	line       int    // of the key, of the header where a table has one, or of an element itself; from 1
	kind       nodeKind
	text       string // decoded text of a string; literal text of a number, bool or date
	start, end int    // bytes of the value; of a table, of the key in its header; equal where it has none
	inline     bool   // a table in braces: start, end include these
	children   []*node
	parent     *node

	named map[string]*node // the children of a table
	depth int
	came  origin
}

// origin is how a table came to be; TOML forbids some ways to add to it.
type origin int

const (
	implied origin = iota // by a header of a table inside it
	opened                // by its own header
	dotted                // by a dotted key
)

// mostInside bounds tables and arrays inside one another, so that paths stay short.
const mostInside = 32

// parseDocument reads the text of a TOML 1.0 file into its tree, whose root has
// neither key nor place. Each error is an *Error with the line and says what to
// do.
func parseDocument(name string, text []byte) (*node, error) {
	d := &document{name: name, text: text}
	if err := d.checkBytes(); err != nil {
		return nil, err
	}
	for i, c := range text {
		if c == '\n' {
			d.breaks = append(d.breaks, i)
		}
	}
	toml := bytes.TrimPrefix(text, []byte(byteOrderMark))
	d.skipped = len(text) - len(toml)
	d.parser.Reset(toml)

	root := &node{kind: tableNode}
	at := root
	for d.parser.NextExpression() {
		x := d.parser.Expression()
		var err error
		switch x.Kind {
		case unstable.KeyValue:
			_, err = d.keyValue(at, x)
		case unstable.Table:
			at, err = d.header(root, x)
		case unstable.ArrayTable:
			k := d.keyOf(x)
			err = d.fail(k.line, "[[%s]]: tables in double brackets have no names, and blocks here need one; write single brackets and a name, as in [drive.clock]", joinKey(k.parts...))
		}
		if err != nil {
			return nil, err
		}
	}
	if err := d.parser.Error(); err != nil {
		return nil, d.syntax(err)
	}
	return root, nil
}

type document struct {
	name    string
	text    []byte
	breaks  []int // places of the line feeds
	skipped int   // bytes of the mark at the start, which the parser does not see
	parser  unstable.Parser
}

const byteOrderMark = "\ufeff"

func (d *document) fail(line int, format string, args ...any) error {
	return &Error{File: d.name, Line: line, What: fmt.Sprintf(format, args...)}
}

// line is the number of the line that holds the byte at a place.
func (d *document) line(at int) int { return 1 + sort.SearchInts(d.breaks, at) }

// checkBytes refuses what is no text and what the parser would blame on
// something else.
func (d *document) checkBytes() error {
	text := d.text
	lineAt := func(i int) int { return 1 + bytes.Count(text[:i], []byte("\n")) }
	if bytes.HasPrefix(text, []byte{0xff, 0xfe}) || bytes.HasPrefix(text, []byte{0xfe, 0xff}) {
		return d.fail(1, "the text is UTF-16; save the file as UTF-8")
	}
	if i := bytes.IndexByte(text, 0); i >= 0 {
		return d.fail(lineAt(i), "the file is binary, not text; give an experiment file (TOML)")
	}
	if !utf8.Valid(text) {
		i := 0
		for {
			r, n := utf8.DecodeRune(text[i:])
			if r == utf8.RuneError && n == 1 {
				return d.fail(lineAt(i), "byte %#x is not UTF-8; save the file as UTF-8", text[i])
			}
			i += n
		}
	}
	for i, c := range text {
		if c == '\r' && (i+1 == len(text) || text[i+1] != '\n') {
			return d.fail(lineAt(i), "a carriage return stands alone; save the file with line endings LF or CR LF")
		}
	}
	return nil
}

// syntax turns the parser's complaint into an error with place and advice.
func (d *document) syntax(err error) error {
	what, line := err.Error(), d.line(len(d.text))
	if n := len(d.breaks); n > 0 && d.breaks[n-1] == len(d.text)-1 {
		line-- // nothing stands behind the last line feed
	}
	var p *unstable.ParserError
	if errors.As(err, &p) {
		what = p.Message
		if len(p.Highlight) > 0 {
			line = d.line(int(d.parser.Range(p.Highlight).Offset) + d.skipped)
		}
	}
	// A text of several lines that never ends is blamed on the end of the file;
	// it began with the last three quotes.
	for _, quotes := range []string{`"""`, `'''`} {
		if at := bytes.LastIndex(d.text, []byte(quotes)); at >= 0 && strings.HasSuffix(what, "not terminated by "+quotes) {
			line = d.line(at)
		}
	}
	return d.fail(line, "not valid TOML: %s%s", what, advice(d.lineText(line)))
}

func (d *document) lineText(line int) string {
	lines := bytes.SplitAfterN(d.text, []byte("\n"), line+1)
	return strings.TrimSpace(string(lines[line-1]))
}

var (
	curlyQuotes = regexp.MustCompile(`[“”„‟‘’‚]`)
	bareHeader  = regexp.MustCompile(`^\[[^]"]*[^]A-Za-z0-9_\-."\s][^]"]*\]`)
	bareKey     = regexp.MustCompile(`^[^=\s"#\[]*[^=\s"#\[A-Za-z0-9_\-.'][^=\s"#\[]*\s*=`)
	bareValue   = regexp.MustCompile(`^[^=#]+=\s*[^\s"'\[{#]`)
	noEqual     = regexp.MustCompile(`^[A-Za-z0-9_\-.]+\s*(:|\s[^=]*$)`)
)

// advice says what a line with a slip probably needs.
func advice(line string) string {
	switch {
	case curlyQuotes.MatchString(line):
		return `; use straight quotes, "…"`
	case bareHeader.MatchString(line):
		return `; a name with other signs than letters, digits, _ and - needs quotes, as in [level."S1/2"]`
	case bareKey.MatchString(line):
		return `; a name with other signs than letters, digits, _ and - needs quotes, as in "g:e" = 1.0`
	case bareValue.MatchString(line):
		return `; texts and numbers with a unit stand in quotes, as in rabi = "12 kHz"`
	case noEqual.MatchString(line):
		return `; a key and its value have = between them, as in points = 201`
	}
	return "; look for quotes, brackets, commas or an = that are missing or too many"
}

// dottedKey is a key of the file with its place.
type dottedKey struct {
	parts      []string
	line       int
	start, end int
}

func (d *document) keyOf(x *unstable.Node) (k dottedKey) {
	for it := x.Key(); it.Next(); {
		part := it.Node()
		k.parts = append(k.parts, string(part.Data))
		start := int(part.Raw.Offset) + d.skipped
		if len(k.parts) == 1 {
			k.start, k.line = start, d.line(start)
		}
		k.end = start + int(part.Raw.Length)
	}
	return k
}

// add makes a child of a table.
func (d *document) add(to *node, key string, line int) (*node, error) {
	n := &node{key: key, path: joinKey(key), line: line, parent: to, depth: to.depth + 1}
	if to.path != "" {
		n.path = to.path + "." + n.path
	}
	if n.depth > mostInside {
		return nil, d.fail(line, "tables stand inside one another more than %d deep; an experiment file needs four", mostInside)
	}
	if to.named == nil {
		to.named = map[string]*node{}
	}
	to.children, to.named[key] = append(to.children, n), n
	return n, nil
}

// header opens [a.b].
func (d *document) header(root *node, x *unstable.Node) (at *node, err error) {
	k := d.keyOf(x)
	at = root
	for _, part := range k.parts {
		next := at.child(part)
		if next == nil {
			if next, err = d.add(at, part, k.line); err != nil {
				return nil, err
			}
		}
		if next.kind != tableNode || next.inline {
			return nil, d.fail(k.line, "[%s]: %s has a value in line %d already; keep one of the two", joinKey(k.parts...), next.path, next.line)
		}
		at = next
	}
	if at.came != implied {
		return nil, d.fail(k.line, "[%s]: this table stands in line %d already; put everything in one place", at.path, at.line)
	}
	at.came, at.line, at.start, at.end = opened, k.line, k.start, k.end
	return at, nil
}

// keyValue adds an entry to a table, and those between for a dotted key.
func (d *document) keyValue(at *node, x *unstable.Node) (n *node, err error) {
	k := d.keyOf(x)
	last := len(k.parts) - 1
	for _, part := range k.parts[:last] {
		next := at.child(part)
		switch {
		case next == nil:
			if next, err = d.add(at, part, k.line); err != nil {
				return nil, err
			}
			next.came = dotted
		case next.kind != tableNode || next.inline:
			return nil, d.fail(k.line, "%s: %s has a value in line %d already; put everything in one place", joinKey(k.parts...), next.path, next.line)
		case next.came != dotted:
			return nil, d.fail(k.line, "%s: the table %s stands in line %d already; put this key there", joinKey(k.parts...), next.path, next.line)
		}
		at = next
	}
	if twice := at.child(k.parts[last]); twice != nil {
		return nil, d.fail(k.line, "%s is set twice, in lines %d and %d; keep one", twice.path, twice.line, k.line)
	}
	if n, err = d.add(at, k.parts[last], k.line); err != nil {
		return nil, err
	}
	return n, d.value(n, x.Value(), k.end)
}

// value fills a node with what stands behind its key, which ends at from. The
// parser gives no places of arrays and of the ends of tables in braces; they
// follow from those of what is inside.
func (d *document) value(n *node, v *unstable.Node, from int) error {
	switch v.Kind {
	case unstable.Array:
		n.kind = arrayNode
		n.start = d.skip(from)
		at := n.start + 1
		for it := v.Children(); it.Next(); {
			at = d.skip(at)
			c := &node{key: n.key, path: n.path, line: d.line(at), parent: n, depth: n.depth + 1}
			if c.depth > mostInside {
				return d.fail(c.line, "lists stand inside one another more than %d deep; an experiment file needs two", mostInside)
			}
			n.children = append(n.children, c)
			if err := d.value(c, it.Node(), at); err != nil {
				return err
			}
			at = c.end
		}
		n.end = d.skip(at) + 1
		return nil
	case unstable.InlineTable:
		n.kind = tableNode
		n.start = d.skip(from)
		at := n.start + 1
		for it := v.Children(); it.Next(); {
			c, err := d.keyValue(n, it.Node())
			if err != nil {
				return err
			}
			at = c.end
		}
		n.inline = true // from now on nothing can be added
		n.end = d.skip(at) + 1
		return nil
	case unstable.String:
		n.kind = stringNode
	case unstable.Integer:
		n.kind = integerNode
	case unstable.Float:
		n.kind = floatNode
	case unstable.Bool:
		n.kind = boolNode
	default:
		n.kind = dateNode
	}
	n.text = string(v.Data)
	n.start = int(v.Raw.Offset) + d.skipped
	n.end = n.start + int(v.Raw.Length)
	return nil
}

// skip passes over what may stand between values: blanks, line ends, commas,
// the equals sign and remarks.
func (d *document) skip(at int) int {
	for {
		switch d.text[at] {
		case ' ', '\t', '\r', '\n', ',', '=':
			at++
		case '#':
			at += bytes.IndexByte(d.text[at:], '\n') + 1
		default:
			return at
		}
	}
}

// child finds an entry of a table by its key; nil when there is none.
func (n *node) child(key string) *node { return n.named[key] }

// at finds an entry by its dotted path; nil when there is none.
func (n *node) at(path string) *node {
	parts, err := splitKey(path)
	if err != nil {
		return nil
	}
	for _, part := range parts {
		if n = n.child(part); n == nil {
			return nil
		}
	}
	return n
}

// joinKey writes a dotted key; parts are in quotes only where TOML wants them.
func joinKey(parts ...string) string {
	out := make([]string, len(parts))
	for i, p := range parts {
		out[i] = p
		if !standsBare(p) {
			out[i] = quotedKey(p)
		}
	}
	return strings.Join(out, ".")
}

// standsBare reports whether a part of a key may stand without quotes.
func standsBare(part string) bool {
	for _, c := range part {
		letter := c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9'
		if !letter && c != '_' && c != '-' {
			return false
		}
	}
	return part != ""
}

func quotedKey(part string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, c := range part {
		switch {
		case c == '"' || c == '\\':
			b.WriteByte('\\')
			b.WriteRune(c)
		case c < ' ' || c == 0x7f:
			fmt.Fprintf(&b, `\u%04x`, c)
		default:
			b.WriteRune(c)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// splitKey takes a dotted key apart. Names and pairs of names hold no dot, so
// that quotes may be left out; a part that begins with ' is in quotes only if
// they close at its end.
func splitKey(path string) ([]string, error) {
	var parts []string
	for rest := path; ; {
		rest = strings.TrimSpace(rest)
		part, behind, quoted, err := quotedPart(rest)
		if err != nil {
			return nil, fmt.Errorf("%q: %w", path, err)
		}
		more := strings.HasPrefix(behind, ".")
		switch {
		case !quoted:
			part, behind, more = strings.Cut(rest, ".")
			if part = strings.TrimSpace(part); part == "" {
				return nil, fmt.Errorf("%q has an empty part; write names with a dot between, as in drive.clock.rabi", path)
			}
		case more:
			behind = behind[1:]
		}
		parts = append(parts, part)
		if !more {
			return parts, nil
		}
		rest = behind
	}
}

// quotedPart reads a part in quotes, and the blanks behind it.
func quotedPart(text string) (part, behind string, quoted bool, err error) {
	ends := func(behind string) (string, bool) {
		behind = strings.TrimLeft(behind, " \t")
		return behind, behind == "" || behind[0] == '.'
	}
	switch {
	case strings.HasPrefix(text, "'"):
		part, behind, quoted = strings.Cut(text[1:], "'")
		if behind, ends := ends(behind); quoted && ends {
			return part, behind, true, nil
		}
		return "", "", false, nil // a name like 'a or 'a'b
	case !strings.HasPrefix(text, `"`):
		return "", "", false, nil
	}
	var b strings.Builder
	for rest := text[1:]; rest != ""; {
		if rest[0] == '"' {
			behind, ok := ends(rest[1:])
			if !ok {
				return "", "", false, errors.New("something stands behind a closing quote; a dot belongs there")
			}
			return b.String(), behind, true, nil
		}
		c, multibyte, tail, err := strconv.UnquoteChar(rest, '"')
		if err != nil {
			return "", "", false, errors.New(`a backslash in quotes begins \" \\ or \u and four digits`)
		}
		if multibyte || c < utf8.RuneSelf {
			b.WriteRune(c)
		} else {
			b.WriteByte(byte(c))
		}
		rest = tail
	}
	return "", "", false, errors.New("a quote is never closed")
}

// edit replaces the bytes from start to end of a file.
type edit struct {
	start, end int
	with       string
}

// applyEdits carries out edits and keeps every other byte. Edits at one place
// keep their order. It panics when they overlap or leave the text.
func applyEdits(text []byte, edits []edit) []byte {
	edits = slices.Clone(edits)
	slices.SortStableFunc(edits, func(a, b edit) int { return a.start - b.start })
	out := make([]byte, 0, len(text))
	at := 0
	for _, e := range edits {
		if e.start < at || e.end < e.start || e.end > len(text) {
			panic("experiment: edits overlap or leave the text")
		}
		out = append(append(out, text[at:e.start]...), e.with...)
		at = e.end
	}
	return append(out, text[at:]...)
}
