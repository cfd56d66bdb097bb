package experiment

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"

	"rhotrace/io/quantity"
	"rhotrace/io/tracefile"
)

// trace is a [trace.NAME] block: how a measured trace is read.
type trace struct {
	name   string
	file   string
	x      []traceColumn // scanned dials, or the one column of recorded time
	time   bool          // x is recorded time: no scan
	y      string
	yIs    string // fraction, counts, value
	shots  field
	column string // column of shots, when shots is none
	yError string
	at     []Turn
	shows  string
	scale  field
	offset field
	node   *node
}

type traceColumn struct {
	dial   field // none: recorded time
	column string
	unit   string
}

func (r *reader) readTraces() {
	r.blocks("trace", "one for each measured trace", func(k *keys, name string, n *node) {
		t := &trace{name: name, shots: none, node: n}
		k.text("file", &t.file, "file beside the experiment; without it the block describes traces given on the command line")
		x := k.find("x", "column, or table of columns", "column of the scanned dial; { dial = \"column\" } for several, { time = \"column\" } for recorded time")
		unit := k.find("x-unit", "unit, or table of units", "unit of that column")
		yNode := k.text("y", &t.y, "column of the signal")
		k.text("y-is", &t.yIs, "fraction, counts or value")
		shots := k.find("shots", "number or column", "shots of each point; else the readout's")
		k.text("y-error", &t.yError, "column of the standard errors")
		at := k.table("at", "table of dials", "dials that stood elsewhere for this trace")
		k.text("shows", &t.shows, "column of the prediction that it measures; else the signal")
		k.number("scale", &t.scale, number.or(1), "trace = offset + scale × prediction")
		k.number("offset", &t.offset, number.or(0), "trace = offset + scale × prediction")
		k.done()
		if r.listing {
			return
		}
		r.e.shape.traces = append(r.e.shape.traces, t)
		if yNode == nil {
			k.fail(nil, "y", "is missing: name the column of the signal")
		}
		r.traceX(k, t, x, unit)
		r.traceShots(k, t, shots)
		r.traceSignal(k, t)
		if at != nil {
			r.traceAt(k, t, at)
		}
	})
}

// traceX reads which columns stand for which dials.
func (r *reader) traceX(k *keys, t *trace, x, unit *node) {
	s := r.e.shape
	switch {
	case x == nil:
		k.fail(nil, "x", "is missing: name the column of the scanned dial")
	case x.kind == stringNode && len(s.scans) == 1 && len(s.scans[0].dials) == 1:
		t.x = []traceColumn{{dial: s.scans[0].dials[0], column: x.text}}
	case x.kind == stringNode:
		k.fail(x, "x", "the file does not scan exactly one dial; say which, as in { \"step.dark.lasts\" = \"wait\" } or { time = \"t\" }")
	case x.kind != tableNode || len(x.children) == 0:
		k.fail(x, "x", "must be a column or a table of columns")
	default:
		for _, c := range x.children {
			if c.kind != stringNode {
				k.fail(c, "x", "must name a column in quotes")
				return
			}
			if c.key == "time" {
				t.time = true
				t.x = append(t.x, traceColumn{dial: none, column: c.text})
				continue
			}
			i, err := r.e.lookup(c.key)
			if err != nil {
				k.fail(c, "x", "%v", err)
				return
			}
			t.x = append(t.x, traceColumn{dial: field(i), column: c.text})
		}
		if t.time && len(t.x) > 1 {
			k.fail(x, "x", "recorded time stands alone; the file's scans do not apply")
		}
	}
	for i := range t.x {
		r.traceUnit(k, &t.x[i], unit, len(t.x) > 1)
	}
}

func (r *reader) traceUnit(k *keys, c *traceColumn, unit *node, several bool) {
	path, dim := "time", quantity.Time
	if c.dial != none {
		d := &r.e.shape.dials[c.dial]
		path, dim = d.Path, d.dimension
	}
	n := unit
	if unit != nil && unit.kind == tableNode {
		n = nil
		for _, u := range unit.children {
			if bare(u.key) == bare(path) {
				n = u
			}
		}
	} else if unit != nil && several {
		k.fail(unit, "x-unit", "must be a table like x, because x has several columns")
		return
	}
	switch {
	case n == nil && (dim == quantity.One || c.column == path):
		return // a number without dimension, or a table of rhotrace itself: SI
	case n == nil:
		k.fail(nil, "x-unit", "is missing: say in which unit column %q gives %s", c.column, path)
		return
	case n.kind != stringNode:
		k.fail(n, "x-unit", "must be a unit in quotes, as in \"ms\"")
		return
	}
	if _, err := quantity.Parse("1 "+n.text, dim); err != nil {
		k.fail(n, "x-unit", "%v", strings.TrimPrefix(err.Error(), `"1 `+n.text+`": `))
		return
	}
	c.unit = n.text
}

func (r *reader) traceShots(k *keys, t *trace, n *node) {
	if n == nil {
		return
	}
	if n.kind == stringNode {
		if _, err := quantity.Parse(n.text, quantity.One); err != nil {
			t.column = n.text
			return
		}
	}
	t.shots = k.quantity(n, "shots", number.from(1).wholly(), "shots of each point of this trace")
}

// traceSignal checks what the trace measures.
func (r *reader) traceSignal(k *keys, t *trace) {
	bright := r.e.shape.readout != nil && r.e.shape.readout.what == readBright
	if t.yIs == "" {
		t.yIs = "value"
		if bright && t.shows == "" {
			t.yIs = "fraction"
		}
	}
	if t.yIs != "fraction" && t.yIs != "counts" && t.yIs != "value" {
		k.fail(k.n.child("y-is"), "y-is", "%q is none of fraction, counts and value", t.yIs)
	}
	if t.shows == "" && r.e.shape.readout == nil {
		k.fail(nil, "shows", "is missing: the file has no [readout], so name the column that the trace measures, as in \"population.%s\"", r.e.shape.levels[len(r.e.shape.levels)-1])
	}
	if t.shows != "" {
		if err := r.e.checkColumn(t.shows); err != nil {
			k.fail(k.n.child("shows"), "shows", "%v", err)
		}
	}
}

func (r *reader) traceAt(k *keys, t *trace, at *node) {
	for _, c := range at.children {
		i, err := r.e.lookup(c.key)
		if err != nil {
			k.fail(c, "at", "%v", err)
			continue
		}
		if v, ok := k.scanValue(c, field(i)); ok {
			t.at = append(t.at, Turn{Path: r.e.shape.dials[i].Path, Value: v})
		}
	}
}

// unknown is an [unknown.NAME] block: what a fit may turn.
type unknown struct {
	name      string
	dial      field
	low, high float64
	perTrace  bool
}

func (r *reader) readUnknowns() {
	taken := map[field]string{}
	r.blocks("unknown", "one for each dial that a fit may turn", func(k *keys, name string, n *node) {
		u := &unknown{name: name, dial: none}
		var path, per string
		pathNode := k.text("dial", &path, "the dial that a fit may turn; it starts at the file's value")
		low := k.find("low", "quantity of the dial", "lower bound")
		high := k.find("high", "quantity of the dial", "upper bound")
		perNode := k.text("per", &per, "all (one value) or trace (a value for each trace)")
		k.done()
		if r.listing {
			return
		}
		if pathNode == nil {
			k.fail(nil, "dial", "is missing: name the dial that a fit may turn")
			return
		}
		i, err := r.e.lookup(path)
		if err != nil {
			k.fail(pathNode, "dial", "%v", err)
			return
		}
		d := &r.e.shape.dials[i]
		u.dial, u.low, u.high = field(i), d.Low, d.High
		if d.Whole {
			k.fail(pathNode, "dial", "%s takes whole numbers; a fit turns continuous dials only", d.Path)
		}
		if other, there := taken[u.dial]; there {
			k.fail(pathNode, "dial", "%s is already unknown.%s", d.Path, other)
		}
		taken[u.dial] = name
		for _, b := range []struct {
			n   *node
			dst *float64
		}{{low, &u.low}, {high, &u.high}} {
			if b.n == nil {
				continue
			}
			if v, ok := k.scanValue(b.n, u.dial); ok {
				*b.dst = v
			}
		}
		if v := r.e.values[u.dial]; r.first == nil && (u.low >= u.high || v < u.low || v > u.high) {
			k.fail(n, "", "low and high must enclose the file's value %s of %s", d.Format(v), d.Path)
		}
		switch {
		case perNode == nil || per == "all":
		case per == "trace":
			u.perTrace = true
		default:
			k.fail(perNode, "per", "%q is neither all nor trace", per)
		}
		r.e.shape.unknowns = append(r.e.shape.unknowns, u)
	})
}

// Unknown is a dial that the file lets a fit turn.
type Unknown struct {
	Name      string
	Dial      Dial
	Low, High float64 // bounds, SI
	Value     float64 // where it stands, SI
	PerTrace  bool    // a value for each trace
}

// Unknowns lists the [unknown] blocks.
func (e *Experiment) Unknowns() (list []Unknown) {
	for _, u := range e.shape.unknowns {
		list = append(list, Unknown{Name: u.name, Dial: e.shape.dials[u.dial], Low: u.low, High: u.high, Value: e.values[u.dial], PerTrace: u.perTrace})
	}
	return list
}

// Trace is a measured trace in the terms of the experiment.
type Trace struct {
	Name   string
	File   string
	Dials  []string    // paths of the scanned dials; empty for recorded time
	Points [][]float64 // values of those dials for each row, SI
	Times  []float64   // recorded times (s), when Dials is empty
	Y      []float64
	Error  []float64 // standard errors as given; nil when the file has none
	Shots  []float64 // shots of each row; nil when not known
	Is     string    // "fraction", "counts" or "value"
	Bright bool      // counts are of shots called bright, not of photons
	Shows  string    // column of the prediction
	At     []Turn
	Scale  string // paths of the dials of scale and offset; empty for a trace without block
	Offset string
	// Remarks say how the file was read.
	Remarks []string
	Text    []byte
	Lines   []int // line of the file for each row, from 1
}

// Traces reads the measured traces of the file, then the given ones, each as
// the [trace] block without file describes (or, without one, by the columns
// named like the scanned dial and "signal").
func (e *Experiment) Traces(files ...string) ([]*Trace, error) {
	var list []*Trace
	var pattern *trace
	seen := map[string]bool{}
	once := func(path string) error {
		if clean := filepath.Clean(path); seen[clean] {
			return fmt.Errorf("%s: is given twice and would count as two measurements; give it once", path)
		} else {
			seen[clean] = true
		}
		return nil
	}
	for _, t := range e.shape.traces {
		if t.file == "" {
			if pattern != nil && len(files) > 0 {
				return nil, e.errorOf(t.node, "stands beside trace.%s, and both have no file: the traces given on the command line need one description", pattern.name)
			}
			pattern = t
			continue
		}
		path := t.file
		if !filepath.IsAbs(path) {
			path = filepath.Join(e.shape.dir, path)
		}
		if err := once(path); err != nil {
			return nil, err
		}
		one, err := e.readTrace(t, t.name, path)
		if err != nil {
			return nil, err
		}
		list = append(list, one)
	}
	for _, path := range files {
		t, name := pattern, filepath.Base(path)
		if t == nil {
			var err error
			if t, err = e.plainTrace(); err != nil {
				return nil, err
			}
		}
		if err := once(path); err != nil {
			return nil, err
		}
		one, err := e.readTrace(t, name, path)
		if err != nil {
			return nil, err
		}
		list = append(list, one)
	}
	return list, nil
}

func (e *Experiment) errorOf(n *node, format string, args ...any) error {
	return (&reader{file: e.shape.file}).errorAt(n, n.path, format, args...)
}

// plainTrace describes a table as predict writes it.
func (e *Experiment) plainTrace() (*trace, error) {
	if len(e.shape.scans) != 1 || e.shape.readout == nil {
		return nil, &Error{File: e.shape.file, Path: "trace", What: "the file does not say how a measured trace is read; add [trace.any] with x, x-unit and y"}
	}
	t := &trace{name: "any", yIs: "value", y: "signal", shots: none, scale: none, offset: none}
	if e.shape.readout.what == readBright {
		t.yIs = "fraction"
	}
	for _, f := range e.shape.scans[0].dials {
		t.x = append(t.x, traceColumn{dial: f, column: e.shape.dials[f].Path})
	}
	return t, nil
}

func (e *Experiment) readTrace(t *trace, name, path string) (*Trace, error) {
	data, err := tracefile.ReadFile(path)
	if err != nil {
		return nil, err
	}
	out := &Trace{Name: name, File: path, Is: t.yIs, Shows: t.shows, At: t.at, Remarks: data.Remarks, Text: data.Text}
	if out.Shows == "" {
		out.Shows = "signal"
	}
	out.Bright = e.shape.readout == nil || e.shape.readout.what == readBright
	if t.scale != none {
		out.Scale, out.Offset = e.shape.dials[t.scale].Path, e.shape.dials[t.offset].Path
	}
	wanted := []string{t.y}
	for _, c := range t.x {
		wanted = append(wanted, c.column)
	}
	for _, c := range []string{t.yError, t.column} {
		if c != "" {
			wanted = append(wanted, c)
		}
	}
	columns := map[string][]float64{}
	for _, c := range wanted {
		col, err := data.Column(c)
		if err != nil {
			if t.node == nil {
				return nil, fmt.Errorf("%w; to say how a trace given on the command line is read, add [trace.NAME] without file to %s, with x, x-unit and y", err, e.shape.file)
			}
			return nil, fmt.Errorf("%w (trace.%s of %s)", err, t.name, e.shape.file)
		}
		columns[c] = col.Values
	}
	keep := finiteRows(columns, len(data.Lines))
	if dropped := len(data.Lines) - len(keep); dropped > 0 {
		out.Remarks = append(out.Remarks, fmt.Sprintf("%d of %d rows have no number in a column that is needed and were left out", dropped, len(data.Lines)))
	}
	if len(keep) == 0 {
		return nil, fmt.Errorf("%s: no row has numbers in all of the columns %s", path, orList(wanted))
	}
	pick := func(name string) []float64 {
		v := make([]float64, len(keep))
		for i, row := range keep {
			v[i] = columns[name][row]
		}
		return v
	}
	for _, row := range keep {
		out.Lines = append(out.Lines, data.Lines[row])
	}
	out.Y = pick(t.y)
	if t.yError != "" {
		out.Error = pick(t.yError)
	}
	if err := e.traceShotNumbers(t, out, pick, data.Lines, keep); err != nil {
		return nil, err
	}
	return out, e.tracePoints(t, out, pick, data.Lines, keep)
}

// finiteRows lists the rows that have a finite number in every column.
func finiteRows(columns map[string][]float64, rows int) (keep []int) {
	for i := range rows {
		ok := true
		for _, c := range columns {
			ok = ok && !math.IsNaN(c[i]) && !math.IsInf(c[i], 0)
		}
		if ok {
			keep = append(keep, i)
		}
	}
	return keep
}

func (e *Experiment) traceShotNumbers(t *trace, out *Trace, pick func(string) []float64, lines, keep []int) error {
	constant := none
	switch {
	case t.column != "":
		out.Shots = pick(t.column)
	case t.shots != none:
		constant = t.shots
	case e.shape.readout != nil && e.shape.readout.shots != none && out.Shows == "signal":
		constant = e.shape.readout.shots
	}
	if constant != none {
		out.Shots = make([]float64, len(out.Y))
		for i := range out.Shots {
			out.Shots[i] = e.values[constant]
		}
	}
	for i, n := range out.Shots {
		if n <= 0 {
			return fmt.Errorf("%s:%d: has %g shots; every row needs at least one", out.File, lines[keep[i]], n)
		}
	}
	if out.Is == "counts" && out.Shots == nil && (e.shape.readout == nil || e.shape.readout.what == readBright) {
		return fmt.Errorf("%s: the signal is in counts; say of how many with shots in trace.%s", out.File, t.name)
	}
	return nil
}

func (e *Experiment) tracePoints(t *trace, out *Trace, pick func(string) []float64, lines, keep []int) error {
	out.Points = make([][]float64, len(keep))
	for i := range out.Points {
		out.Points[i] = make([]float64, 0, len(t.x))
	}
	for _, c := range t.x {
		values := pick(c.column)
		dim := quantity.Time
		if c.dial != none {
			dim = e.shape.dials[c.dial].dimension
		}
		factor := 1.0
		if c.unit != "" {
			factor, _ = quantity.Parse("1 "+c.unit, dim)
		}
		for i := range values {
			values[i] *= factor
			if c.dial != none {
				if wrong := e.shape.dials[c.dial].check(values[i]); wrong != "" {
					return fmt.Errorf("%s:%d: column %q gives %s, which %s", out.File, lines[keep[i]], c.column, e.shape.dials[c.dial].Path, wrong)
				}
			} else if values[i] < 0 {
				return fmt.Errorf("%s:%d: column %q gives a time before the start of the record", out.File, lines[keep[i]], c.column)
			}
			out.Points[i] = append(out.Points[i], values[i])
		}
		if t.time {
			out.Times = values
		} else {
			out.Dials = append(out.Dials, e.shape.dials[c.dial].Path)
		}
	}
	if t.time {
		out.Points = nil
	}
	return nil
}
