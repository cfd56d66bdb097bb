package experiment

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"rhotrace/io/quantity"
)

// Key is one key of the file format, for the manual.
type Key struct {
	Path    string // names chosen by the user stand as NAME
	Takes   string // "time", "text", "list of names", …
	Range   string // for quantities
	Default string
	Doc     string
}

// reader turns the tree of a file into an Experiment. It keeps the first error;
// an unknown key goes before everything else, because a misspelt key would
// otherwise be reported as missing.
type reader struct {
	file     string
	e        *Experiment
	unknown  *Error
	first    *Error
	manual   []Key
	listing  bool // only the manual is wanted
	warnings []string
}

// top finds a table at the top of the file; nil when there is none, or no file.
func (r *reader) top(name string) *node {
	if r.e.shape.root == nil {
		return nil
	}
	return r.e.shape.root.child(name)
}

func (r *reader) fail(n *node, path, format string, args ...any) {
	if r.first == nil {
		r.first = r.errorAt(n, path, format, args...)
	}
}

func (r *reader) errorAt(n *node, path, format string, args ...any) *Error {
	e := &Error{File: r.file, Path: path, What: fmt.Sprintf(format, args...)}
	if n != nil {
		e.Line = n.line
	}
	return e
}

func (r *reader) err() error {
	switch {
	case r.unknown != nil:
		return r.unknown
	case r.first != nil:
		return r.first
	}
	return nil
}

// keys reads the keys of one table of the file. Each quantity is named once:
// the call reads the file, makes the dial, feeds the near names of unknown keys
// and the manual.
type keys struct {
	r     *reader
	n     *node // nil when the table is not in the file
	path  string
	known []string
	free  bool // the rest of the keys are names chosen by the user
}

func (r *reader) keys(n *node, path string) *keys { return &keys{r: r, n: n, path: path} }

func (k *keys) find(key, takes, doc string) *node {
	k.known = append(k.known, key)
	if k.r.listing {
		k.r.manual = append(k.r.manual, Key{Path: k.path + "." + key, Takes: takes, Doc: doc})
	}
	if k.n == nil {
		return nil
	}
	return k.n.child(key)
}

// done reports keys that nobody asked for. Sub-tables in names are allowed.
func (k *keys) done(names ...string) {
	if k.n == nil || k.free {
		return
	}
	known := append(append([]string(nil), k.known...), names...)
	for _, c := range k.n.children {
		ok := false
		for _, name := range known {
			ok = ok || name == c.key
		}
		if !ok && k.r.unknown == nil {
			k.r.unknown = k.r.errorAt(c, c.path, "unknown key%s", didYouMean(c.key, known))
		}
	}
}

func (k *keys) fail(n *node, key, format string, args ...any) {
	if n == nil {
		n = k.n
	}
	path := k.path
	if key != "" {
		path = strings.TrimPrefix(k.path+"."+joinKey(key), ".")
	}
	k.r.fail(n, path, format, args...)
}

// number reads a quantity and makes its dial.
func (k *keys) number(key string, dst *field, what kind, doc string) {
	n := k.find(key, what.dimension.Name(), doc)
	if k.r.listing {
		k.describe(what)
	}
	*dst = k.quantity(n, key, what, doc)
}

func (k *keys) describe(what kind) {
	last := &k.r.manual[len(k.r.manual)-1]
	d := Dial{Low: what.low, High: what.high, dimension: what.dimension}
	last.Range = d.Range()
	switch {
	case what.standard != nil:
		last.Default = quantity.Format(*what.standard, what.dimension)
	case what.needed:
		last.Default = "needed"
	}
}

func (k *keys) quantity(n *node, key string, what kind, doc string) field {
	if n == nil {
		switch {
		case what.standard != nil:
			return k.r.e.addDial(joinPath(k.path, key), what, doc, *what.standard, nil)
		case what.needed:
			k.fail(nil, key, "is missing: %s, for example %s", doc, example(what))
		}
		return none
	}
	v, ok := k.r.value(n, what)
	if !ok {
		return none
	}
	f := k.r.e.addDial(joinPath(k.path, key), what, doc, v, n)
	if wrong := k.r.e.shape.dials[f].check(v); wrong != "" {
		k.r.fail(n, n.path, "%s", wrong)
	}
	return f
}

func joinPath(path, key string) string {
	return strings.TrimPrefix(path+"."+joinKey(key), ".")
}

func example(what kind) string {
	unit := what.dimension.Unit()
	switch unit {
	case "1":
		return "0.5"
	case "s":
		return `"20 us"`
	case "Hz":
		return `"12 kHz"`
	case "rad":
		return `"90 deg"`
	case "1/s":
		return `"3.8e7 /s"`
	}
	return `"1 ` + unit + `"`
}

// value reads the number of a node: a text with a unit, or a bare number when
// there is no dimension.
func (r *reader) value(n *node, what kind) (float64, bool) {
	switch n.kind {
	case stringNode:
		v, err := what.parse(n.text)
		if err != nil {
			r.fail(n, n.path, "%v", err)
			return 0, false
		}
		return v, true
	case integerNode, floatNode:
		if what.dimension != quantity.One {
			r.fail(n, n.path, "%s needs a unit, as in %s: it is a %s", n.text, example(what), what.dimension.Name())
			return 0, false
		}
		v, err := parseLiteral(n)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			r.fail(n, n.path, "%s is not a finite number", n.text)
			return 0, false
		}
		return v, true
	}
	r.fail(n, n.path, "must be a %s, for example %s", numberWord(what), example(what))
	return 0, false
}

func numberWord(what kind) string {
	if what.dimension == quantity.One {
		return "number"
	}
	return what.dimension.Name()
}

// parseLiteral reads a TOML integer or float.
func parseLiteral(n *node) (float64, error) {
	text := strings.ReplaceAll(n.text, "_", "")
	if n.kind == integerNode {
		if i, err := strconv.ParseInt(text, 0, 64); err == nil {
			return float64(i), nil
		}
	}
	return strconv.ParseFloat(text, 64)
}

// setting reads a number that is no dial.
func (k *keys) setting(key string, dst *float64, what kind, doc string) *node {
	n := k.find(key, what.dimension.Name(), doc)
	if k.r.listing {
		k.describe(what)
	}
	if what.standard != nil {
		*dst = *what.standard
	}
	if n == nil {
		if what.needed {
			k.fail(nil, key, "is missing: %s, for example %s", doc, example(what))
		}
		return nil
	}
	if v, ok := k.r.value(n, what); ok {
		d := Dial{Low: what.low, High: what.high, Off: what.off, Whole: what.whole, dimension: what.dimension}
		if wrong := d.check(v); wrong != "" {
			k.r.fail(n, n.path, "%s", wrong)
			return n
		}
		*dst = v
	}
	return n
}

// whole reads a whole number that is no dial.
func (k *keys) whole(key string, dst *int, what kind, doc string) *node {
	var v float64
	n := k.setting(key, &v, what.wholly(), doc)
	*dst = int(v)
	return n
}

func (k *keys) text(key string, dst *string, doc string) *node {
	n := k.find(key, "text", doc)
	if n == nil {
		return nil
	}
	if n.kind != stringNode {
		k.fail(n, key, "must be a text in quotes: %s", doc)
		return n
	}
	*dst = n.text
	return n
}

func (k *keys) flag(key string, dst *bool, doc string) {
	n := k.find(key, "true or false", doc)
	if n == nil {
		return
	}
	if n.kind != boolNode {
		k.fail(n, key, "must be true or false: %s", doc)
		return
	}
	*dst = n.text == "true"
}

// texts reads a text or a list of texts; each one's node comes with it.
func (k *keys) texts(key, doc string) []*node {
	n := k.find(key, "name or list of names", doc)
	if n == nil {
		return nil
	}
	return k.textsOf(n, key)
}

func (k *keys) textsOf(n *node, key string) []*node {
	list := []*node{n}
	if n.kind == arrayNode {
		list = n.children
	}
	for _, c := range list {
		if c.kind != stringNode {
			k.fail(c, key, "must be a name in quotes or a list of names")
			return nil
		}
	}
	return list
}

// table finds an inline or ordinary table of names chosen by the user.
func (k *keys) table(key, takes, doc string) *node {
	n := k.find(key, takes, doc)
	if n != nil && n.kind != tableNode {
		k.fail(n, key, "must be a table, for example %s = { e = 1.0 }: %s", joinKey(key), doc)
		return nil
	}
	return n
}

// level reads the name of a level; −1 with an error when there is none.
func (r *reader) level(n *node, name, path string) int {
	for i, l := range r.e.shape.levels {
		if l == name {
			return i
		}
	}
	r.fail(n, path, "there is no level %q%s", name, didYouMean(name, r.e.shape.levels))
	return -1
}

// pair reads "a:b" as two levels.
func (r *reader) pair(n *node, text, path string) (a, b int, ok bool) {
	left, right, found := strings.Cut(text, ":")
	if !found || left == "" || right == "" || strings.Contains(right, ":") {
		r.fail(n, path, "%q is not a pair of levels; write two names with a colon between, as in \"g:e\"", text)
		return 0, 0, false
	}
	a, b = r.level(n, left, path), r.level(n, right, path)
	if a >= 0 && a == b {
		r.fail(n, path, "%q names one level twice; a pair needs two", text)
		return 0, 0, false
	}
	return a, b, a >= 0 && b >= 0
}

// nameAllowed holds the rule for names chosen by the user.
func nameAllowed(name string) bool {
	for _, c := range name {
		letter := c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9'
		if !letter && !strings.ContainsRune("_'+-/", c) {
			return false
		}
	}
	return name != ""
}
