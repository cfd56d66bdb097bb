package experiment

import (
	"bytes"
	"math"
	"sort"
	"strings"

	"rhotrace/io/quantity"
	"rhotrace/models"
)

// Text is the file that gives e: the file as it was read, with the values that
// were turned since. Comments and layout stay. Where a duration or an
// amplitude that an area fixed would follow on reading and must not, the area
// is replaced by what it came to.
func (e *Experiment) Text() []byte {
	text, err := e.shape.write(e.values, true)
	if err != nil {
		panic("experiment: " + err.Error()) // every value here was read or checked
	}
	return text
}

// write replaces in the text the values that differ from the file's. With
// freeze, durations and amplitudes keep what they are.
func (s *shape) write(values []float64, freeze bool) ([]byte, error) {
	var edits []edit
	changed := func(f field) bool {
		return f != none && math.Float64bits(values[f]) != math.Float64bits(s.original[f])
	}
	skip := map[field]bool{}
	if freeze {
		frozen, err := s.frozenEdits(values, skip)
		if err != nil {
			return nil, err
		}
		edits = append(edits, frozen...)
	}
	shares := s.shareEdits(values, changed, skip)
	edits = append(edits, shares...)
	for i := range s.dials {
		f := field(i)
		if !changed(f) || skip[f] {
			continue
		}
		literal := s.literal(f, values[f])
		if n := s.nodes[f]; n != nil {
			edits = append(edits, edit{n.start, n.end, literal})
			continue
		}
		edits = append(edits, s.insertion(s.dials[f].Path, literal))
	}
	sort.SliceStable(edits, func(i, j int) bool { return edits[i].start < edits[j].start })
	return applyEdits(s.text, mergeInsertions(edits)), nil
}

// literal writes a value as TOML.
func (s *shape) literal(f field, v float64) string {
	d := &s.dials[f]
	text := quantity.Format(v, d.dimension)
	if d.dimension == quantity.One {
		return tomlNumber(text)
	}
	return `"` + text + `"`
}

func tomlNumber(text string) string {
	if !strings.ContainsAny(text, ".eEin%") {
		return text // a whole number is a number too
	}
	if strings.Contains(text, "%") {
		return `"` + text + `"`
	}
	return text
}

// frozenEdits writes durations and areas so that reading them again gives what
// the experiment has now.
func (s *shape) frozenEdits(values []float64, skip map[field]bool) ([]edit, error) {
	e := &Experiment{shape: s, values: values}
	x, err := e.settled(values)
	if err != nil {
		return nil, nil // what is out of range after settling is reported by Run
	}
	var edits []edit
	for _, st := range s.steps {
		if st.area == none || !s.areaMoves(st, values) {
			continue
		}
		n := s.nodes[st.area]
		d := s.drives[st.on[0]]
		now := models.TurnRate(x[d.rabi].Real, st.scaleOf(x))
		switch {
		case st.ideal: // the angle that the rotation has now
			angle := values[st.area] * now / st.turnRate
			edits = append(edits, edit{n.start, n.end, s.literal(st.area, angle)})
		case st.lasts == none: // the duration that the area fixed
			lasts := values[st.area] / st.turnRate
			key := lineOfKey(s.text, n)
			edits = append(edits, edit{key, n.end, `lasts = "` + quantity.Format(lasts, quantity.Time) + `"`})
		default: // the area that the amplitude comes to
			amplitude := now * values[st.area] / (st.turnRate * st.integral)
			edits = append(edits, edit{n.start, n.end, s.literal(st.area, amplitude*st.integralOf(x))})
		}
		skip[st.area] = true
	}
	return edits, nil
}

// areaMoves reports whether reading the file again would change the duration
// or the amplitude of the step.
func (s *shape) areaMoves(st *step, values []float64) bool {
	file, err := (&Experiment{shape: s, values: s.original}).settled(s.original)
	if err != nil {
		return false
	}
	now, err := (&Experiment{shape: s, values: values}).settled(values)
	if err != nil {
		return false
	}
	rabi := s.drives[st.on[0]].rabi
	moved := now[rabi].Real != file[rabi].Real || st.scaleOf(now) != st.scaleOf(file)
	return moved || st.lasts != none && st.integralOf(now) != st.integral
}

// shareEdits rewrites tables whose first entry takes what the others leave.
func (s *shape) shareEdits(values []float64, changed func(field) bool, skip map[field]bool) (edits []edit) {
	table := func(fields []field, parent *node) {
		any := false
		rest := 1.0
		for _, f := range fields {
			if f != none {
				any = any || changed(f)
				rest -= values[f]
			}
		}
		if !any || parent == nil {
			return
		}
		for i, c := range parent.children {
			v := rest
			if f := fields[i]; f != none {
				v = values[f]
				skip[f] = true
			}
			edits = append(edits, edit{c.start, c.end, tomlNumber(quantity.Format(math.Max(0, v), quantity.One))})
		}
	}
	table(s.start.populations, s.root.at("start.populations"))
	for _, d := range s.decays {
		if !d.joint && len(d.shares) > 1 {
			table(d.shares, s.root.at(joinKey("decay", d.name, "to")))
		}
	}
	return edits
}

// insertion adds a value that has no place in the text: behind the header of
// the nearest table above it, or behind the last entry inside its braces.
func (s *shape) insertion(path, literal string) edit {
	parts, err := splitKey(path)
	if err != nil {
		panic("experiment: " + err.Error())
	}
	for i := len(parts) - 1; i > 0; i-- {
		n := s.root.at(joinKey(parts[:i]...))
		if n == nil || n.kind != tableNode {
			continue
		}
		key := joinKey(parts[i:]...) + " = " + literal
		switch {
		case n.inline && len(n.children) > 0:
			at := n.children[len(n.children)-1].end
			return edit{at, at, ", " + key}
		case n.inline:
			return edit{n.start + 1, n.start + 1, " " + key + " "}
		case n.end > n.start: // it has a header
			return s.line(n.end, key)
		}
	}
	at := 0
	if bytes.HasPrefix(s.text, []byte("\ufeff")) {
		at = len("\ufeff")
	}
	return edit{at, at, joinKey(parts...) + " = " + literal + s.lineEnd()}
}

// line adds a line behind the one that the byte at stands in.
func (s *shape) line(at int, text string) edit {
	if i := bytes.IndexByte(s.text[at:], '\n'); i >= 0 {
		return edit{at + i + 1, at + i + 1, text + s.lineEnd()}
	}
	return edit{len(s.text), len(s.text), s.lineEnd() + text + s.lineEnd()}
}

func (s *shape) lineEnd() string {
	if bytes.Contains(s.text, []byte("\r\n")) {
		return "\r\n"
	}
	return "\n"
}

// mergeInsertions joins insertions at one place into one edit.
func mergeInsertions(edits []edit) (out []edit) {
	for _, e := range edits {
		if k := len(out) - 1; k >= 0 && e.start == e.end && out[k].start == e.start && out[k].end == e.end {
			out[k].with += e.with
			continue
		}
		out = append(out, e)
	}
	return out
}

// lineOfKey is where the key of a value begins.
func lineOfKey(text []byte, n *node) int {
	at := n.start
	for at > 0 && text[at-1] != '\n' && text[at-1] != ',' && text[at-1] != '{' {
		at--
	}
	for at < n.start && (text[at] == ' ' || text[at] == '\t') {
		at++
	}
	return at
}
