package experiment

import (
	"fmt"
	"math"
)

// mostRows is how many rows a table may have.
const mostRows = 10_000_000

// scan is a [scan.NAME] block: one axis of the table.
type scan struct {
	name  string
	dials []field
	rows  [][]float64 // one value per dial, SI
	log   bool
}

func (r *reader) readScans() {
	taken := map[field]string{}
	r.blocks("scan", "one for each axis", func(k *keys, name string, n *node) {
		s := &scan{name: name}
		var path, spacing string
		dial := k.text("dial", &path, "the dial that is scanned")
		from := k.find("from", "quantity of the dial", "first value")
		to := k.find("to", "quantity of the dial", "last value")
		var points int
		pointsNode := k.whole("points", &points, number.from(2).to(mostRows), "number of points, ends included")
		spacingNode := k.text("spacing", &spacing, "linear (unless said) or log")
		values := k.find("values", "list, or table of lists", "the values, in place of from, to and points; without dial a table of dials that run together")
		k.done()
		if r.listing {
			return
		}
		defer func() { r.e.shape.scans = append(r.e.shape.scans, s) }()
		if spacingNode != nil && spacing != "linear" && spacing != "log" {
			k.fail(spacingNode, "spacing", "there is no spacing %q; use linear or log", spacing)
			return
		}
		switch {
		case dial == nil && values != nil && values.kind == tableNode:
			k.together(s, values)
		case dial == nil:
			k.fail(nil, "dial", "is missing: name the dial that is scanned")
		case values != nil && (from != nil || to != nil || pointsNode != nil):
			k.fail(values, "values", "stands beside from, to or points; give one or the other")
		case values != nil:
			k.listed(s, dial, path, values)
		case points == 0 && pointsNode != nil: // said already
		case from == nil || to == nil || pointsNode == nil:
			k.fail(nil, "", "give from, to and points, or values = [ … ]")
		default:
			s.log = spacing == "log"
			k.spaced(s, dial, path, from, to, points)
		}
		for _, f := range s.dials {
			if other, there := taken[f]; there {
				k.fail(nil, "", "scans %s, which scan.%s scans already", r.e.shape.dials[f].Path, other)
			}
			taken[f] = name
		}
		if len(s.dials) > 0 && len(s.rows) == 0 && r.first == nil {
			k.fail(values, "values", "has no points")
		}
	})
	rows := 1.0
	for _, s := range r.e.shape.scans {
		rows *= float64(len(s.rows))
	}
	if rows *= float64(max(1, r.e.shape.record.samples)); rows > mostRows {
		r.fail(r.top("scan"), "scan", "the table would have %.3g rows; at most %d are allowed", rows, mostRows)
	}
}

// scanned finds the dial of a scan.
func (k *keys) scanned(n *node, path string) (field, bool) {
	i, err := k.r.e.lookup(path)
	if err != nil {
		k.fail(n, "dial", "%v", err)
		return none, false
	}
	return field(i), true
}

func (k *keys) scanValue(n *node, f field) (float64, bool) {
	d := &k.r.e.shape.dials[f]
	v, ok := k.r.value(n, kind{dimension: d.dimension, off: d.Off})
	if !ok {
		return 0, false
	}
	if wrong := d.check(v); wrong != "" {
		k.r.fail(n, n.path, "%s %s", d.Path, wrong)
		return 0, false
	}
	return v, true
}

func (k *keys) listed(s *scan, dial *node, path string, values *node) {
	f, ok := k.scanned(dial, path)
	if !ok {
		return
	}
	s.dials = []field{f}
	if values.kind != arrayNode {
		k.fail(values, "values", "must be a list, as in [\"1 ms\", \"2 ms\"]")
		return
	}
	for _, c := range values.children {
		if v, ok := k.scanValue(c, f); ok {
			s.rows = append(s.rows, []float64{v})
		}
	}
}

func (k *keys) together(s *scan, values *node) {
	for j, c := range values.children {
		f, ok := k.scanned(c, c.key)
		if !ok || c.kind != arrayNode {
			if ok {
				k.fail(c, "values", "%s must be a list", c.key)
			}
			return
		}
		if j == 0 {
			s.rows = make([][]float64, len(c.children))
		}
		if len(c.children) != len(s.rows) {
			k.fail(c, "values", "%s has %d values, the first dial has %d; dials that run together need equally many", c.key, len(c.children), len(s.rows))
			return
		}
		s.dials = append(s.dials, f)
		for i, v := range c.children {
			if x, ok := k.scanValue(v, f); ok {
				s.rows[i] = append(s.rows[i], x)
			}
		}
	}
	if len(values.children) == 0 {
		k.fail(values, "values", "names no dial")
	}
}

func (k *keys) spaced(s *scan, dial *node, path string, from, to *node, points int) {
	f, ok := k.scanned(dial, path)
	if !ok {
		return
	}
	s.dials = []field{f}
	a, okA := k.scanValue(from, f)
	b, okB := k.scanValue(to, f)
	if !okA || !okB {
		return
	}
	switch {
	case a == b:
		k.fail(to, "to", "is the same as from; a scan needs two different ends")
		return
	case math.IsInf(a, 0) || math.IsInf(b, 0):
		k.fail(from, "from", "an infinite end cannot be scanned; use values")
		return
	case s.log && (a <= 0 || b <= 0):
		k.fail(from, "from", "log spacing needs both ends above zero")
		return
	}
	for i := range points {
		v := spacedValue(a, b, i, points, s.log)
		if wrong := k.r.e.shape.dials[f].check(v); wrong != "" {
			k.fail(nil, "", "point %d of %s %s", i+1, path, wrong)
			return
		}
		s.rows = append(s.rows, []float64{v})
	}
}

// spacedValue is point i of n from a to b; the ends are exact.
func spacedValue(a, b float64, i, n int, log bool) float64 {
	if i == n-1 {
		return b
	}
	u := float64(i) / float64(n-1)
	if log && i > 0 {
		return a * math.Exp(u*math.Log(b/a))
	}
	return a + u*(b-a)
}

// record is the [record] block: what goes into the table beside the scan.
type record struct {
	steady     bool // the state to which the order, repeated without end, leads
	samples    int
	during     int // index of a step, −1: the whole order
	coherences [][2]int
}

func (r *reader) readRecord() {
	rec := &r.e.shape.record
	rec.during = -1
	top := r.top("record")
	k := r.keys(top, "record")
	k.whole("samples", &rec.samples, number.from(0).to(mostRows).or(0), "0: the end only; n > 1: n equally spaced times")
	list := k.find("coherences", "\"all\", \"none\" or list of pairs", "coherences in the table, pairs a:b, a before b in the file")
	var during string
	duringNode := k.text("during", &during, "samples belong to the first run of this step")
	var when string
	whenNode := k.text("when", &when, "\"steady\": the state to which the order, repeated without end, leads")
	k.done()
	if r.listing {
		return
	}
	if rec.steady = when == "steady"; whenNode != nil && !rec.steady {
		k.fail(whenNode, "when", "%q is not known; write when = \"steady\" or leave it out for the end of the order", when)
	}
	if rec.steady {
		r.checkSteady(k, rec)
	}
	if rec.samples == 1 {
		k.fail(top.child("samples"), "samples", "is 1; write 0 for the end only, or 2 and more for times from 0 to the end")
	}
	if duringNode != nil {
		rec.during = r.playedStep(duringNode, during)
		if rec.samples == 0 {
			k.fail(duringNode, "during", "has no effect without samples; add samples = 101 or leave it out")
		}
	}
	if list != nil {
		r.readCoherences(k, list)
	}
}

// playedStep finds a step that the order plays.
func (r *reader) playedStep(n *node, name string) int {
	s := r.e.shape
	var names []string
	used := make([]bool, len(s.steps))
	uses(s.sequence.order, used)
	for i, st := range s.steps {
		if st.name == name {
			if !used[i] {
				r.fail(n, n.path, "step %q is not in the order", name)
			}
			return i
		}
		names = append(names, st.name)
	}
	r.fail(n, n.path, "there is no step %q%s", name, didYouMean(name, names))
	return -1
}

func (r *reader) readCoherences(k *keys, list *node) {
	rec := &r.e.shape.record
	levels := len(r.e.shape.levels)
	if list.kind == stringNode && (list.text == "all" || list.text == "none") {
		for a := 0; list.text == "all" && a < levels; a++ {
			for b := a + 1; b < levels; b++ {
				rec.coherences = append(rec.coherences, [2]int{a, b})
			}
		}
		return
	}
	seen := map[[2]int]bool{}
	for _, c := range k.textsOf(list, "coherences") {
		a, b, ok := r.pair(c, c.text, c.path)
		switch {
		case !ok:
		case a > b:
			k.fail(c, "coherences", "write %s:%s, in the order of the file", r.e.shape.levels[b], r.e.shape.levels[a])
		case seen[[2]int{a, b}]:
			k.fail(c, "coherences", "names %q twice", c.text)
		default:
			seen[[2]int{a, b}] = true
			rec.coherences = append(rec.coherences, [2]int{a, b})
		}
	}
}

// coherenceName is the start of a pair's column names.
func (e *Experiment) coherenceName(p [2]int) string {
	return fmt.Sprintf("coherence.%s:%s", e.shape.levels[p[0]], e.shape.levels[p[1]])
}

// checkSteady holds what does not go with a steady state.
func (r *reader) checkSteady(k *keys, rec *record) {
	for _, key := range []string{"samples", "during"} {
		if n := k.n.child(key); n != nil {
			k.fail(n, key, "does not go with when = \"steady\", which has no time")
		}
	}
	if o := r.e.shape.readout; o != nil && o.during >= 0 {
		k.fail(r.top("readout").child("during"), "during", "does not go with a steady state: photons counted without end have no number; leave it out for their rate")
	}
}

// checkEndless refuses steps without a duration, but for the only step of an
// order that goes on to its steady state.
func (r *reader) checkEndless() {
	s := r.e.shape
	alone := s.record.steady && len(s.sequence.order) == 1 && s.sequence.order[0].group == nil && s.sequence.order[0].number == none && s.sequence.order[0].count == 1
	for i, st := range s.steps {
		if st.lasts == none && st.area == none && !(alone && s.sequence.order[0].step == i) {
			path := joinKey("step", st.name)
			r.fail(s.root.at(path), path, "give lasts = \"20 us\" or area = \"0.5 pi\"")
		}
	}
}
