package experiment

import (
	"gonum.org/v1/gonum/num/dual"

	"rhotrace/models"
)

// step is a [step.NAME] block: a stretch of time, or a rotation in no time.
type step struct {
	name  string
	on    []int // drives, the first one carries the area
	lasts field
	area  field
	ideal bool // lasts = "0 s" beside area: a rotation in no time

	changes []change
	course  course // of all drives that have none of their own

	// Frozen when the file is read, so that turning the Rabi frequency
	// afterwards leaves a duration alone, as a pulse generator does.
	turnRate float64 // 2π rabi scale of the first drive (rad/s) in the file
	integral float64 // ∫ of the course in the file, s; 0 unless area and lasts are both given
}

// change is what one step does to a drive, shift, decay or dephasing while it
// runs. Fields that do not apply are none.
type change struct {
	kind                   blockKind
	index                  int
	phase, detuning, scale field  // drive
	size                   field  // shift
	rate                   field  // decay, dephasing
	course                 course // drive, shift
}

type blockKind int

const (
	driveBlock blockKind = iota
	shiftBlock
	decayBlock
	dephasingBlock
)

// block finds a drive, shift, decay or dephasing by name.
func (s *shape) block(name string) (blockKind, int, bool) {
	for i, d := range s.drives {
		if d.name == name {
			return driveBlock, i, true
		}
	}
	for i, d := range s.shifts {
		if d.name == name {
			return shiftBlock, i, true
		}
	}
	for i, d := range s.decays {
		if d.name == name {
			return decayBlock, i, true
		}
	}
	for i, d := range s.dephasings {
		if d.name == name {
			return dephasingBlock, i, true
		}
	}
	return 0, 0, false
}

// blockNames lists the names that a step may change, with the node of each.
func (s *shape) blockNames() (names []string) {
	for _, d := range s.drives {
		names = append(names, d.name)
	}
	for _, d := range s.shifts {
		names = append(names, d.name)
	}
	for _, d := range s.decays {
		names = append(names, d.name)
	}
	for _, d := range s.dephasings {
		names = append(names, d.name)
	}
	return names
}

// stepKeys are the keys of a step; blocks may not be named like one.
var stepKeys = []string{"on", "area", "lasts", "shape", "centre", "width", "rise", "fall", "chirp", "file"}

// checkBlockNames holds the rule that drives, shifts, decays and dephasings are
// named neither like a key of a step nor like one another.
func (r *reader) checkBlockNames() {
	taken := map[string]string{}
	for _, key := range stepKeys {
		taken[key] = "a key of a step"
	}
	for _, group := range []string{"drive", "shift", "decay", "dephasing"} {
		top := r.top(group)
		if top == nil {
			continue
		}
		for _, n := range top.children {
			if other, there := taken[n.key]; there {
				r.fail(n, n.path, "the name %q is that of %s; drives, shifts, decays and dephasings need names of their own", n.key, other)
			}
			taken[n.key] = "[" + n.path + "]"
		}
	}
}

func (r *reader) readSteps() {
	r.blocks("step", "one for each pulse or wait", func(k *keys, name string, n *node) {
		s := &step{name: name}
		seen := map[string]bool{}
		for _, c := range k.texts("on", "drives that are on; the first one carries the area") {
			kind, i, ok := r.e.shape.block(c.text)
			switch {
			case !ok || kind != driveBlock:
				k.fail(c, "on", "there is no drive %q%s", c.text, didYouMean(c.text, r.driveNames()))
			case seen[c.text]:
				k.fail(c, "on", "names the drive %q twice", c.text)
			default:
				s.on = append(s.on, i)
			}
			seen[c.text] = true
		}
		r.duration(k, s)
		r.course(k, &s.course, s.name, true)
		if r.listing {
			r.listChanges(k)
			return
		}
		r.readChanges(k, s)
		r.checkCourses(k, s)
		k.done(append(append([]string(nil), stepKeys...), r.e.shape.blockNames()...)...)
		r.e.shape.steps = append(r.e.shape.steps, s)
	})
}

func (r *reader) driveNames() (names []string) {
	for _, d := range r.e.shape.drives {
		names = append(names, d.name)
	}
	return names
}

// duration reads lasts and area.
func (r *reader) duration(k *keys, s *step) {
	var lasts, area *node
	if k.n != nil {
		lasts, area = k.n.child("lasts"), k.n.child("area")
	}
	if lasts != nil && area != nil {
		if v, ok := r.value(lasts, timeSpan); ok && v == 0 {
			s.ideal = true
		}
	}
	if s.ideal {
		s.lasts = none
		k.known = append(k.known, "lasts")
	} else {
		k.number("lasts", &s.lasts, timeSpan, "duration")
	}
	k.number("area", &s.area, angle.from(0), "pulse area 2π × Rabi frequency × duration of the first drive in on; alone it gives the duration, beside lasts the strength of that drive in this step")
	if r.listing {
		return
	}
	switch {
	case area != nil && len(s.on) == 0:
		k.fail(area, "area", "needs a drive; name it in on")
	}
}

func (r *reader) readChanges(k *keys, s *step) {
	isOn := map[int]bool{}
	for _, d := range s.on {
		isOn[d] = true
	}
	for _, c := range k.n.children {
		kind, index, ok := r.e.shape.block(c.key)
		if !ok {
			continue
		}
		if c.kind != tableNode {
			k.fail(c, c.key, "must be a table of what changes in this step, as in [step.%s.%s]", s.name, c.key)
			continue
		}
		sub := r.keys(c, c.path)
		ch := change{kind: kind, index: index, phase: none, detuning: none, scale: none, size: none, rate: none, course: noCourse}
		r.change(sub, &ch, isOn[index] && kind == driveBlock, c.key)
		sub.done()
		s.changes = append(s.changes, ch)
		if kind == driveBlock {
			isOn[index] = false // its scale is a dial already
		}
	}
	for _, d := range s.on {
		if !isOn[d] {
			continue
		}
		ch := change{kind: driveBlock, index: d, phase: none, detuning: none, size: none, rate: none, course: noCourse}
		ch.scale = r.e.addDial(joinPath(k.path, r.e.shape.drives[d].name)+".scale", number.from(0), scaleDoc, 1, nil)
		s.changes = append(s.changes, ch)
	}
}

const scaleDoc = "factor on the Rabi frequency in this step"

// change reads the table of one block inside a step.
func (r *reader) change(sub *keys, ch *change, on bool, name string) {
	switch ch.kind {
	case driveBlock:
		sub.number("detuning", &ch.detuning, frequency, "detuning added in this step; the frame follows the drive")
		if !on && sub.n != nil {
			for _, key := range []string{"phase", "scale", "shape", "chirp"} {
				if n := sub.n.child(key); n != nil {
					sub.fail(n, key, "has no effect because the drive is off in this step; name %q in on or leave it out", name)
					return
				}
			}
			sub.known = append(sub.known, "phase", "scale")
			return
		}
		sub.number("phase", &ch.phase, angle, "phase added in this step")
		sub.number("scale", &ch.scale, number.from(0).or(1), scaleDoc)
		r.course(sub, &ch.course, name, true)
	case shiftBlock:
		sub.number("size", &ch.size, frequency, "shift added in this step")
		r.course(sub, &ch.course, name, false)
	case decayBlock, dephasingBlock:
		sub.number("rate", &ch.rate, rate.offAt(0), "rate added in this step")
	}
}

// listChanges puts the keys that a step may change into the manual.
func (r *reader) listChanges(k *keys) {
	r.change(r.keys(nil, k.path+".DRIVE"), &change{kind: driveBlock}, true, "DRIVE")
	r.change(r.keys(nil, k.path+".SHIFT"), &change{kind: shiftBlock}, false, "")
	r.change(r.keys(nil, k.path+".DECAY"), &change{kind: decayBlock}, false, "")
}

// freeze fixes durations and amplitudes given by an area, from the drives as
// they stand in the file with user dials at their values.
func (r *reader) freeze() {
	e := r.e
	x, err := e.settled(e.values)
	if err != nil {
		r.fail(nil, "", "%v", err)
		return
	}
	for _, s := range e.shape.steps {
		if s.area == none || len(s.on) == 0 {
			continue
		}
		d := e.shape.drives[s.on[0]]
		s.turnRate = models.TurnRate(x[d.rabi].Real, s.scaleOf(x))
		n := e.shape.nodes[s.area]
		if s.turnRate == 0 {
			r.fail(n, e.shape.dials[s.area].Path, "cannot be reached: the Rabi frequency of drive %q is zero", d.name)
		}
		if s.lasts != none {
			if e.values[s.lasts] > 0 {
				s.integral = s.integralOf(x)
			}
			if s.integral <= 0 {
				r.fail(n, e.shape.dials[s.area].Path, "cannot be reached: the pulse has no area within lasts")
			}
		}
	}
}

// scaleOf is the factor of this step on its first drive.
func (s *step) scaleOf(x []dual.Number) float64 {
	for _, ch := range s.changes {
		if ch.kind == driveBlock && ch.index == s.on[0] && ch.scale != none {
			return x[ch.scale].Real
		}
	}
	return 1
}
