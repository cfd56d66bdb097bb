package experiment

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
)

// Experiment is one experiment file: its shape (which levels, drives, steps,
// scans exist) and the vector of its values. It is never changed; With and Edit
// return new ones that share the shape. The zero value is not usable.
type Experiment struct {
	shape  *shape
	values []float64 // one per dial
}

// shape is what With leaves as it is.
type shape struct {
	file string // name for messages
	dir  string // where files beside it are looked for
	text []byte
	root *node

	title    string
	accuracy float64

	levels     []string
	energies   []field // none: zero
	drives     []*drive
	decays     []*decay
	dephasings []*weighted
	shifts     []*weighted
	steps      []*step
	sequence   sequence
	start      start
	userDials  []*userDial
	scans      []*scan
	spreads    []*spread
	record     record
	readout    *readout
	traces     []*trace
	unknowns   []*unknown

	dials    []Dial
	nodes    []*node        // where each dial's value stands in the text, nil if it does not
	original []float64      // the file's values
	index    map[string]int // unquoted path → dial
	order    []source       // what turns dials, in the order of settling
	warnings []string
}

// Read parses an experiment file. name is used in messages and to find files
// beside it. Every error is an *Error with line and dial path.
func Read(name string, text []byte) (*Experiment, error) {
	root, err := parseDocument(name, text)
	if err != nil {
		return nil, err
	}
	e := &Experiment{shape: &shape{file: name, dir: filepath.Dir(name), text: text, root: root, index: map[string]int{}}}
	r := &reader{file: name, e: e}
	if len(root.children) == 0 {
		return nil, &Error{File: name, What: "is empty; an experiment starts with format = 1 and at least [level.g] and [sequence]"}
	}
	r.readFile(root)
	if err := r.err(); err != nil {
		return nil, err
	}
	e.shape.original = append([]float64(nil), e.values...)
	e.shape.warnings = r.warnings
	return e, nil
}

// ReadFile reads the experiment file at path.
func ReadFile(path string) (*Experiment, error) {
	text, err := os.ReadFile(path)
	if info, stat := os.Stat(path); stat == nil && info.IsDir() {
		return nil, fmt.Errorf("%s: is a directory; name a file in it", path)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: cannot be read: %w; check the name and the permissions", path, rootCause(err))
	}
	return Read(path, text)
}

// rootCause drops the operation and the path that package os repeats.
func rootCause(err error) error {
	if p, ok := err.(*os.PathError); ok {
		return p.Err
	}
	return err
}

// Title is the title in the file, or "".
func (e *Experiment) Title() string { return e.shape.title }

// File is the name under which the experiment was read.
func (e *Experiment) File() string { return e.shape.file }

// Levels lists the names of the levels in the order of the file.
func (e *Experiment) Levels() []string { return append([]string(nil), e.shape.levels...) }

// Warnings are doubts about the file itself.
func (e *Experiment) Warnings() []string { return append([]string(nil), e.shape.warnings...) }

// Dials lists every dial in the order in which the blocks are read: drives,
// decays, dephasings, shifts, steps, sequence, start, user dials, spreads,
// readout, traces.
func (e *Experiment) Dials() []Dial { return append([]Dial(nil), e.shape.dials...) }

// Dial finds a dial by its path; quotes round the parts may be left out. The
// error names the nearest paths.
func (e *Experiment) Dial(path string) (Dial, error) {
	i, err := e.lookup(path)
	if err != nil {
		return Dial{}, err
	}
	return e.shape.dials[i], nil
}

// Value is the value of a dial in SI units.
func (e *Experiment) Value(path string) (float64, error) {
	i, err := e.lookup(path)
	if err != nil {
		return 0, err
	}
	return e.values[i], nil
}

func (e *Experiment) lookup(path string) (int, error) {
	if i, ok := e.shape.index[bare(path)]; ok {
		return i, nil
	}
	known := make([]string, len(e.shape.dials))
	for i, d := range e.shape.dials {
		known[i] = d.Path
	}
	hint := didYouMean(path, known)
	if hint == "" {
		hint = "; `rhotrace dials FILE` lists them"
	}
	return 0, fmt.Errorf("there is no dial %q%s", path, hint)
}

// bare is a path without its quotes: names hold no dot, so nothing is lost.
func bare(path string) string {
	parts, err := splitKey(path)
	if err != nil {
		return path
	}
	return strings.Join(parts, ".")
}

// addDial makes a dial and returns its index.
func (e *Experiment) addDial(path string, what kind, doc string, v float64, n *node) field {
	s := e.shape
	i := len(s.dials)
	s.dials = append(s.dials, Dial{Path: path, Unit: what.dimension.Unit(), Doc: doc, Low: what.low, High: what.high,
		Off: what.off, Whole: what.whole, dimension: what.dimension})
	s.nodes = append(s.nodes, n)
	s.index[bare(path)] = i
	e.values = append(e.values, v)
	return field(i)
}

// Turn sets a dial to a value in SI units.
type Turn struct {
	Path  string
	Value float64
}

// ParseTurn reads `path=value unit`, as in "drive.clock.rabi=12 kHz".
func (e *Experiment) ParseTurn(text string) (Turn, error) {
	path, value, found := strings.Cut(text, "=")
	path, value = strings.TrimSpace(path), strings.TrimSpace(value)
	if !found || path == "" || value == "" {
		return Turn{}, fmt.Errorf("%q is not a turn of a dial; write path=value, for example drive.clock.rabi=\"12 kHz\"", text)
	}
	i, err := e.lookup(path)
	if err != nil {
		return Turn{}, err
	}
	d := &e.shape.dials[i]
	if len(value) > 1 && value[0] == '"' && value[len(value)-1] == '"' {
		value = value[1 : len(value)-1]
	}
	v, err := d.Parse(value)
	if err != nil {
		return Turn{}, fmt.Errorf("%s: %w", d.Path, err)
	}
	return Turn{Path: d.Path, Value: v}, nil
}

// With returns the experiment with dials turned as a pulse generator would see
// it: durations given by an area stay as they are. An unknown path or a value
// out of range is an error that names it.
func (e *Experiment) With(turns ...Turn) (*Experiment, error) {
	values := append([]float64(nil), e.values...)
	for _, t := range turns {
		i, err := e.lookup(t.Path)
		if err != nil {
			return nil, err
		}
		if wrong := e.shape.dials[i].check(t.Value); wrong != "" {
			return nil, fmt.Errorf("%s: %s %s", e.shape.file, e.shape.dials[i].Path, wrong)
		}
		values[i] = t.Value
	}
	n := &Experiment{shape: e.shape, values: values}
	if err := n.shape.start.check(values); err != nil {
		return nil, fmt.Errorf("%s: %w", e.shape.file, err)
	}
	return n, nil
}

// Edit returns the experiment as if the file had said so: durations and
// amplitudes given by an area follow.
func (e *Experiment) Edit(turns ...Turn) (*Experiment, error) {
	if len(turns) == 0 {
		return e, nil
	}
	values := append([]float64(nil), e.values...)
	for _, t := range turns {
		i, err := e.lookup(t.Path)
		if err != nil {
			return nil, err
		}
		if wrong := e.shape.dials[i].check(t.Value); wrong != "" {
			return nil, fmt.Errorf("%s: %s %s", e.shape.file, e.shape.dials[i].Path, wrong)
		}
		values[i] = t.Value
	}
	text, err := e.shape.write(values, false)
	if err != nil {
		return nil, err
	}
	return Read(e.shape.file, text)
}
