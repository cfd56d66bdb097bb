package experiment

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strings"
	"testing"

	"github.com/pelletier/go-toml/v2"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

const wholeDocument = "\ufeff# remark\r\n" + `format = 1
title = "a \"title\" of µs"
accuracy = 1e-8

[level.g]
[level."S1/2"]          # quotes
[drive.clock]
between = ["g", 'S1/2', # two
  ]
rabi = "12 kHz"
chirp.size = 0x1F
chirp.on = true
[drive]
day = 1979-05-27 07:32:00Z
[start]
populations = { g = 1.0, "S1/2" = { x = [[1, 2], [ 3 ]], y.z = 'ü' } , } # braces
lines = """
one
two"""
[drive.probe]
`

func TestDocument(t *testing.T) {
	root, err := parseDocument("a.toml", []byte(wholeDocument))
	require.NoError(t, err)
	var list []string
	var walk func(n *node)
	walk = func(n *node) {
		for _, c := range n.children {
			assert.Same(t, n, c.parent)
			list = append(list, fmt.Sprintf("%d %s %d %s|%s", c.line, c.path, c.kind, c.text, wholeDocument[c.start:c.end]))
			walk(c)
		}
	}
	walk(root)
	assert.Equal(t, []string{
		`2 format 2 1|1`,
		`3 title 1 a "title" of µs|"a \"title\" of µs"`,
		`4 accuracy 3 1e-8|1e-8`,
		`6 level 0 |`,
		`6 level.g 0 |level.g`,
		`7 level."S1/2" 0 |level."S1/2"`,
		`14 drive 0 |drive`,
		`8 drive.clock 0 |drive.clock`,
		"9 drive.clock.between 5 |[\"g\", 'S1/2', # two\n  ]",
		`9 drive.clock.between 1 g|"g"`,
		`9 drive.clock.between 1 S1/2|'S1/2'`,
		`11 drive.clock.rabi 1 12 kHz|"12 kHz"`,
		`12 drive.clock.chirp 0 |`,
		`12 drive.clock.chirp.size 2 0x1F|0x1F`,
		`13 drive.clock.chirp.on 4 true|true`,
		`15 drive.day 6 1979-05-27 07:32:00Z|1979-05-27 07:32:00Z`,
		`21 drive.probe 0 |drive.probe`,
		`16 start 0 |start`,
		`17 start.populations 0 |{ g = 1.0, "S1/2" = { x = [[1, 2], [ 3 ]], y.z = 'ü' } , }`,
		`17 start.populations.g 3 1.0|1.0`,
		`17 start.populations."S1/2" 0 |{ x = [[1, 2], [ 3 ]], y.z = 'ü' }`,
		`17 start.populations."S1/2".x 5 |[[1, 2], [ 3 ]]`,
		`17 start.populations."S1/2".x 5 |[1, 2]`,
		`17 start.populations."S1/2".x 2 1|1`,
		`17 start.populations."S1/2".x 2 2|2`,
		`17 start.populations."S1/2".x 5 |[ 3 ]`,
		`17 start.populations."S1/2".x 2 3|3`,
		`17 start.populations."S1/2".y 0 |`,
		`17 start.populations."S1/2".y.z 1 ü|'ü'`,
		"18 start.lines 1 one\ntwo|\"\"\"\none\ntwo\"\"\"",
	}, list)
	assert.True(t, root.at("start.populations").inline)
	assert.False(t, root.at("start").inline)
	assert.Same(t, root.at(`level."S1/2"`), root.at("level.S1/2"))
	assert.Same(t, root.at(`level."S1/2"`), root.child("level").child("S1/2"))
	assert.Equal(t, "12 kHz", root.at("drive.clock.rabi").text)
	assert.Nil(t, root.at("drive.clock.rabi.x"))
	assert.Nil(t, root.at("drive..clock"))
	assert.Nil(t, root.child("nothing"))
}

func TestDocumentEmpty(t *testing.T) {
	for _, text := range []string{"", "\n", "# only a remark", "\ufeff", "\r\n\r\n", "[a]"} {
		root, err := parseDocument("a.toml", []byte(text))
		require.NoError(t, err, "%q", text)
		assert.LessOrEqual(t, len(root.children), 1)
	}
}

// One slip each; the line is the one that a reader would point at.
func TestDocumentFaults(t *testing.T) {
	for _, c := range []struct {
		name, text string
		line       int
		says       []string
	}{
		{"number with a unit bare", "format = 1\n[drive.a]\nrabi = 12 kHz\n", 3, []string{"quotes", `rabi = "12 kHz"`}},
		{"text bare", "a = 1\nb = clock\n", 2, []string{"quotes"}},
		{"quote not closed", "a = 1\nb = \"12 kHz\nc = 3\n", 2, []string{"TOML"}},
		{"quote not closed at the end", "a = 1\nb = \"12 kHz", 2, []string{"TOML"}},
		{"long text not closed", "a = 1\nb = \"\"\"x\ny\n", 2, nil},
		{"long literal not closed", "a = 1\nb = '''x\ny\n", 2, nil},
		{"curly quotes", "a = 1\n\nb = “12 kHz”\n", 3, []string{"straight quotes"}},
		{"no equals sign", "a = 1\nrabi \"12 kHz\"\n", 2, []string{"="}},
		{"colon for equals", "rabi: \"12 kHz\"\n", 1, []string{"="}},
		{"no value", "a = 1\nb =\nc = 3\n", 2, nil},
		{"no value at the end", "a = 1\nb =", 2, nil},
		{"two values", "a = 1 2\n", 1, nil},
		{"two keys in a line", "a = 1 b = 2\n", 1, nil},
		{"header not closed", "a = 1\n[drive.clock\nb = 2\n", 2, nil},
		{"header empty", "a = 1\n[]\n", 2, nil},
		{"header with two dots", "a = 1\n[a..b]\n", 2, nil},
		{"header with a bare name", "a = 1\n[level.S1/2]\n", 2, []string{`"S1/2"`}},
		{"pair bare", "[x]\ng:e = 1.0\n", 2, []string{`"g:e"`}},
		{"list not closed", "a = [1, 2\nb = 3\n", 2, nil},
		{"list without comma", "a = [\n 1\n 2\n]\n", 3, nil},
		{"braces not closed", "a = { b = 1\nc = 2\n", 2, nil},
		{"braces without comma", "a = { b = 1 c = 2 }\n", 1, nil},
		{"bad escape", "a = 1\nb = \"c:\\data\"\n", 2, nil},
		{"zeros in front", "a = 1\nb = 007\n", 2, nil},
		{"point without digit", "a = 1\nb = 5.\n", 2, nil},
		{"True", "a = 1\nb = True\n", 2, nil},
		{"control sign", "a = 1\n# \x01\n", 2, nil},
		{"key twice", "a = 1\nb = 2\n\na = 3\n", 4, []string{"a is set twice", "lines 1 and 4"}},
		{"key twice in braces", "x = 1\ny = { a = 1, a = 2 }\n", 2, []string{"y.a is set twice", "lines 2 and 2"}},
		{"dotted key twice", "[x]\na.b = 1\n\na.b = 3\n", 4, []string{"x.a.b is set twice", "lines 2 and 4"}},
		{"table twice", "[drive.\"a/b\"]\nx = 1\n[drive.\"a/b\"]\n", 3, []string{`[drive."a/b"]`, "line 1"}},
		{"table over a value", "[a]\nb = 1\n[a.b]\n", 3, []string{"a.b", "line 2"}},
		{"table under a value", "[a]\nb = 1\n[a.b.c]\n", 3, []string{"a.b", "line 2"}},
		{"table over braces", "a = { b = 1 }\n[a.c]\n", 2, []string{"line 1"}},
		{"table over a dotted key", "a.b = 1\n[a]\n", 2, []string{"line 1"}},
		{"dotted key into a value", "a = 1\na.b = 2\n", 2, []string{"line 1"}},
		{"dotted key into braces", "a = { b = 1 }\na.c = 2\n", 2, []string{"line 1"}},
		{"dotted key into a table", "[a.b]\nx = 1\n[a]\nb.y = 1\n", 4, []string{"a.b", "line 1"}},
		{"double brackets", "a = 1\n[[scan]]\nx = 1\n", 2, []string{"[[scan]]", "single brackets", "name"}},
		{"binary", "a = 1\nb\x00", 2, []string{"binary"}},
		{"UTF-16", "\xff\xfea\x00", 1, []string{"UTF-8"}},
		{"Latin-1", "a = 1\n# \xb5s\n", 2, []string{"UTF-8", "0xb5"}},
		{"carriage returns", "a = 1\r\nb = 2\rc = 3\r", 2, []string{"carriage return"}},
		{"windows line ends", "a = 1\r\nb = 2\r\nc = x y\r\n", 3, nil},
		{"mark and fault", "\ufeffa = 1\nb = x y\n", 2, nil},
		{"too deep in keys", "a = 1\n" + strings.Repeat("b.", 40) + "b = 1", 2, []string{"32 deep"}},
		{"too deep in braces", "a = 1\nb = " + strings.Repeat("{a = ", 40) + "1" + strings.Repeat("}", 40), 2, []string{"32 deep"}},
		{"too deep in lists", "a = 1\nb = " + strings.Repeat("[", 40) + "1" + strings.Repeat("]", 40), 2, []string{"32 deep"}},
		{"far too deep", "a = 1\nb = " + strings.Repeat("[", 100000), 2, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			root, err := parseDocument("exp.toml", []byte(c.text))
			assert.Nil(t, root)
			var e *Error
			require.ErrorAs(t, err, &e)
			assert.Equal(t, "exp.toml", e.File)
			assert.Equal(t, c.line, e.Line, err.Error())
			for _, s := range c.says {
				assert.Contains(t, err.Error(), s)
			}
		})
	}
}

func TestKeys(t *testing.T) {
	for _, c := range []struct {
		joined string
		parts  []string
	}{
		{"drive.clock.rabi", []string{"drive", "clock", "rabi"}},
		{`level."S1/2"`, []string{"level", "S1/2"}},
		{`drive.two."m:o"`, []string{"drive", "two", "m:o"}},
		{`level."e'"`, []string{"level", "e'"}},
		{`level."'e"`, []string{"level", "'e"}},
		{`level."3+"`, []string{"level", "3+"}},
		{`a."b.c"."".d`, []string{"a", "b.c", "", "d"}},
		{`"a\"b\\c\u000a\u007fµ"`, []string{"a\"b\\c\n\x7fµ"}},
	} {
		assert.Equal(t, c.joined, joinKey(c.parts...))
		parts, err := splitKey(c.joined)
		require.NoError(t, err)
		assert.Equal(t, c.parts, parts)
	}
	for text, want := range map[string][]string{
		"level.S1/2":         {"level", "S1/2"},
		"drive.two.m:o":      {"drive", "two", "m:o"},
		"level.'S1/2'.x":     {"level", "S1/2", "x"},
		"level.e'.x":         {"level", "e'", "x"},
		"level.'e.x":         {"level", "'e", "x"},
		"level.'e'':x.y":     {"level", "'e'':x", "y"},
		` a . "b" . 'c' .d `: {"a", "b", "c", "d"},
		`"caf\u00e9".é`:      {"café", "é"},
	} {
		parts, err := splitKey(text)
		require.NoError(t, err, text)
		assert.Equal(t, want, parts, text)
	}
	for text, says := range map[string]string{
		"": "empty part", "a.": "empty part", ".a": "empty part", "a..b": "empty part", `"a`: "never closed", `"a"b`: "closing quote", `"a\q"`: "backslash",
	} {
		_, err := splitKey(text)
		require.ErrorContains(t, err, says, text)
	}
}

func TestApplyEdits(t *testing.T) {
	text := []byte("a = 1\r\nb = 2 # two\r\n")
	given := []edit{{11, 12, "22"}, {0, 0, "x"}, {0, 0, "y"}, {4, 5, ""}, {len(text), len(text), "end"}}
	assert.Equal(t, "xya = \r\nb = 22 # two\r\nend", string(applyEdits(text, given)))
	assert.Equal(t, 11, given[0].start, "the list given stays as it is")
	assert.Equal(t, string(text), string(applyEdits(text, nil)))
	assert.Panics(t, func() { applyEdits(text, []edit{{0, 3, ""}, {2, 4, ""}}) })
	assert.Panics(t, func() { applyEdits(text, []edit{{0, 100, ""}}) })
	assert.Panics(t, func() { applyEdits(text, []edit{{3, 2, ""}}) })
}

// The names in a tree as nested maps, to compare with the decoder's.
func names(n *node) map[string]any {
	m := map[string]any{}
	for _, c := range n.children {
		if c.kind == tableNode {
			m[c.key] = names(c)
		} else {
			m[c.key] = nil
		}
	}
	return m
}

func decodedNames(decoded map[string]any) map[string]any {
	m := map[string]any{}
	for k, v := range decoded {
		if inner, ok := v.(map[string]any); ok {
			m[k] = decodedNames(inner)
		} else {
			m[k] = nil
		}
	}
	return m
}

// Whatever the bytes: no panic; an error has a line of the file; what is read
// has the names that the decoder of go-toml (another walk over the same grammar)
// finds, and each value's bytes read again as that value.
func FuzzDocument(f *testing.F) {
	for _, s := range []string{
		wholeDocument, "a.b = 1\n[a]", "[a.b]\n[a]\nb.c = 1", "[a.b]\n[a]\nc = 1", "[a]\nb.c = 1\n[a.b.d]", "[a]\nb.c = 1\n[a.b]", "a = { b.c = 1, b.d = 2 }", "a = {b = {}, b.c = 1}",
		"[[a]]", "a = [ { b = 1 }, [ # ]\n 1 ] ]", "a = \"\"\"\\\n  x\"\"\"", "'' = 1", "\"\\u00e9\" = 1", "a = 12:00:00", "a = 1\rb = 2", "a = [1,]\r\n", "a = {\n}\n", "a = 'x", "a = 1_", "\xef\xbb\xbf[a]",
		"[a]\n[a.b.c]\n[a.b]\nb.c = 1", "a.b.c = 1\na.b = 2", "a.b = 1\na.b.c = 2", "a = nan\nb = -inf", "a = [[[[]]]]",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		root, err := parseDocument("f.toml", text)
		var decoded map[string]any
		reference := toml.Unmarshal(bytes.TrimPrefix(text, []byte(byteOrderMark)), &decoded)
		if err != nil {
			var e *Error
			require.True(t, errors.As(err, &e))
			require.GreaterOrEqual(t, e.Line, 1)
			require.LessOrEqual(t, e.Line, 1+strings.Count(string(text), "\n"))
			ours := strings.Contains(e.What, "[[") || strings.Contains(e.What, " deep") || strings.Contains(e.What, "carriage return")
			require.True(t, reference != nil || ours, "%q is refused: %v", text, err)
			return
		}
		if reference != nil && (hasDate(root) || strings.Contains(reference.Error(), "too large") || strings.Contains(reference.Error(), "out of range")) {
			return // sizes of numbers and days of months are no matter of the tree
		}
		require.NoError(t, reference, "%q", text)
		require.Equal(t, decodedNames(decoded), names(root), "%q", text)
		readAgain(t, text, root)
	})
}

func hasDate(n *node) bool {
	return n.kind == dateNode || slices.ContainsFunc(n.children, hasDate)
}

// readAgain parses the bytes of every value on their own.
func readAgain(t *testing.T, text []byte, n *node) {
	for _, c := range n.children {
		if c.kind != tableNode || c.inline {
			again, err := parseDocument("again", append([]byte("v = "), text[c.start:c.end]...))
			require.NoError(t, err, "%q of %q", text[c.start:c.end], text)
			v := again.child("v")
			require.Equal(t, []any{c.kind, c.text, len(c.children)}, []any{v.kind, v.text, len(v.children)})
			require.Equal(t, 4+c.end-c.start, v.end)
		}
		parts, err := splitKey(c.path)
		require.NoError(t, err, c.path)
		require.Equal(t, c.path, joinKey(parts...))
		readAgain(t, text, c)
	}
}
