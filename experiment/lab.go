package experiment

import (
	"math"
	"strings"

	"rhotrace/io/quantity"
	"rhotrace/models"
)

// drive is a [drive.NAME] block.
type drive struct {
	name      string
	pairs     []models.Pair // lower, upper
	elements  []field       // none: one
	rabi      field
	detuning  field
	phase     field
	linewidth field
	lab       bool // acts as it is, without rotating-wave approximation
}

// decay is a [decay.NAME] block. Rates in 1/s come from rateOf.
type decay struct {
	name    string
	pairs   []models.Pair // from, to
	joint   bool
	shares  []field // none: one (a single target), or what the others leave (the first of several)
	given   given
	size    field
	reverse field
}

// weighted is a [dephasing.NAME] or a [shift.NAME] block.
type weighted struct {
	name    string
	levels  []int
	weights []field
	given   given // dephasing only
	size    field
}

// given says which of the alternatives a file wrote for a rate.
type given int

const (
	byLifetime  given = iota // lifetime of a decay, time of a dephasing
	byLinewidth              // full width at half maximum in Hz
	byRate                   // 1/s
)

// blocks visits [group.NAME] tables in the order of the file.
func (r *reader) blocks(group, doc string, read func(k *keys, name string, n *node)) {
	if r.listing {
		r.manual = append(r.manual, Key{Path: group + ".NAME", Takes: "table", Doc: doc})
		read(r.keys(nil, group+".NAME"), "NAME", nil)
		return
	}
	top := r.top(group)
	if top == nil {
		return
	}
	if top.kind != tableNode {
		r.fail(top, group, "must be a table: write [%s.NAME], %s", group, doc)
		return
	}
	for _, n := range top.children {
		if n.kind != tableNode {
			r.fail(n, n.path, "must be a table: write [%s.NAME], %s", group, doc)
			continue
		}
		if !nameAllowed(n.key) {
			r.fail(n, n.path, "%q is not a name; use letters, digits and _ ' + - /", n.key)
			continue
		}
		read(r.keys(n, joinKey(group, n.key)), n.key, n)
	}
}

func (r *reader) readLevels() {
	r.blocks("level", "one for each level", func(k *keys, name string, n *node) {
		r.e.shape.levels = append(r.e.shape.levels, name)
		var energy field
		k.number("energy", &energy, frequency, "energy over h, for drives with frame = \"lab\"")
		r.e.shape.energies = append(r.e.shape.energies, energy)
		k.done()
	})
	if len(r.e.shape.levels) < 2 && !r.listing {
		r.fail(nil, "level", "an experiment needs at least two levels; write [level.g] and [level.e]")
	}
}

func (r *reader) readDrives() {
	r.blocks("drive", "one for each light field", func(k *keys, name string, n *node) {
		d := &drive{name: name}
		ends := k.texts("between", "lower and upper level, in energy")
		pairs := k.table("pairs", "table of pairs", "elements of several pairs lower:upper that one source drives")
		switch {
		case r.listing:
		case ends != nil && pairs != nil:
			k.fail(pairs, "pairs", "stands beside between; give one of the two")
		case pairs != nil:
			d.pairs, d.elements = k.pairs(pairs, "Rabi frequency of %s over that of the drive")
		case len(ends) != 2 && k.n.child("between") != nil:
			k.fail(k.n.child("between"), "between", "must name two levels, lower then upper, as in [\"g\", \"e\"]")
		case ends == nil:
			k.fail(nil, "between", "is missing: name the lower and the upper level, as in [\"g\", \"e\"]")
		default:
			p := models.Pair{From: r.level(ends[0], ends[0].text, k.path+".between"), To: r.level(ends[1], ends[1].text, k.path+".between")}
			if p.From == p.To && p.From >= 0 {
				k.fail(ends[1], "between", "names one level twice; a drive connects two")
			}
			d.pairs, d.elements = []models.Pair{p}, []field{none}
		}
		k.number("rabi", &d.rabi, frequency.from(0).need(), "Rabi frequency Ω/2π")
		k.number("detuning", &d.detuning, frequency.or(0), "detuning of the drive from its transition")
		k.number("phase", &d.phase, angle.or(0), "phase φ of the field cos(2πνt + φ)")
		k.number("linewidth", &d.linewidth, frequency.from(0).offAt(0), "Lorentzian full width of the source (white frequency noise)")
		var frame string
		if n := k.text("frame", &frame, "\"lab\": the field acts as it is, without rotating-wave approximation; needs the levels' energies"); n != nil && frame != "lab" {
			k.fail(n, "frame", "there is no frame %q; write frame = \"lab\" or leave it out for the frame of the drives", frame)
		}
		d.lab = frame == "lab"
		k.done()
		r.e.shape.drives = append(r.e.shape.drives, d)
	})
}

// pairs reads a table of "a:b" = number.
func (k *keys) pairs(n *node, doc string) (pairs []models.Pair, elements []field) {
	if len(n.children) == 0 {
		k.fail(n, n.key, "is empty; name at least one pair, as in { \"g:e\" = 1.0 }")
	}
	for _, c := range n.children {
		a, b, ok := k.r.pair(c, c.key, c.path)
		if !ok {
			continue
		}
		f := k.r.keys(n, n.path).quantity(c, c.key, number, replaceName(doc, c.key))
		pairs, elements = append(pairs, models.Pair{From: a, To: b}), append(elements, f)
	}
	return pairs, elements
}

func (r *reader) readDecays() {
	r.blocks("decay", "one for each channel", func(k *keys, name string, n *node) {
		d := &decay{name: name}
		var from string
		fromNode := k.text("from", &from, "level that decays")
		to := k.find("to", "name or table of shares", "level it decays to, or shares of the rate that sum to one")
		pairs := k.table("pairs", "table of pairs", "elements of one joint jump operator, from:to")
		switch {
		case r.listing:
		case pairs != nil && (fromNode != nil || to != nil):
			k.fail(pairs, "pairs", "stands beside from or to; give pairs alone")
		case pairs != nil:
			d.joint = true
			d.pairs, d.shares = k.pairs(pairs, "element of %s in the jump operator")
		case fromNode == nil:
			k.fail(nil, "from", "is missing: name the level that decays")
		case to == nil:
			k.fail(nil, "to", "is missing: name the level it decays to")
		default:
			k.targets(d, r.level(fromNode, from, k.path+".from"), to)
		}
		d.given, d.size = k.rate(
			[3]string{"lifetime", "linewidth", "rate"},
			[3]string{"lifetime τ = 1/Γ of this channel", "natural width Γ/2π of this channel, full width at half maximum", "decay rate Γ of this channel"})
		k.reverse(d)
		k.done("to")
		r.e.shape.decays = append(r.e.shape.decays, d)
	})
}

// reverse reads the share that runs back; only a decay with one target has it.
func (k *keys) reverse(d *decay) {
	d.reverse = none
	if d.joint || len(d.pairs) > 1 {
		if n := k.find("reverse", "number", ""); n != nil {
			k.fail(n, "reverse", "needs a decay with one target; split this decay")
		}
		return
	}
	k.number("reverse", &d.reverse, probability.or(0), "share of the rate that runs back")
	if d.reverse != none && !k.r.listing && k.r.e.values[d.reverse] > 0.5 {
		k.r.warnings = append(k.r.warnings, k.path+".reverse is above 0.5: the upper level ends with more population than the lower one")
	}
}

func (k *keys) targets(d *decay, from int, to *node) {
	one := func(n *node, name string) {
		b := k.r.level(n, name, k.path+".to")
		if b == from && b >= 0 {
			k.fail(n, "to", "is the level that decays; a loss of coherence alone is a [dephasing.NAME]")
		}
		d.pairs = append(d.pairs, models.Pair{From: from, To: b})
	}
	switch to.kind {
	case stringNode:
		one(to, to.text)
		d.shares = []field{none}
	case tableNode:
		sum := 0.0
		for i, c := range to.children {
			one(c, c.key)
			v, ok := k.r.value(c, probability)
			if wrong := (&Dial{Low: 0, High: 1, dimension: quantity.One}).check(v); ok && wrong != "" {
				k.r.fail(c, c.path, "%s", wrong)
			}
			sum += v
			f := none
			if i > 0 {
				f = k.r.e.addDial(c.path, probability, "share of the rate that goes to "+c.key+"; the first target takes the rest", v, c)
			}
			d.shares = append(d.shares, f)
		}
		if len(to.children) == 0 || math.Abs(sum-1) > 1e-3 {
			k.fail(to, "to", "the shares sum to %g; they must sum to one", sum)
			return
		}
		for _, f := range d.shares {
			if f != none {
				k.r.e.values[f] /= sum
			}
		}
	default:
		k.fail(to, "to", "must be a level or shares, as in { g = 0.94, d = 0.06 }")
	}
}

// rate reads exactly one of three ways to give a rate.
func (k *keys) rate(names, docs [3]string) (given, field) {
	kinds := [3]kind{timeSpan.above(0).offAt(math.Inf(1)), frequency.from(0).offAt(0), rate.offAt(0)}
	var fields [3]field
	var there []*node
	for i := range names {
		n := k.n
		if n != nil {
			n = n.child(names[i])
		}
		if n != nil {
			there = append(there, n)
		}
		if i == int(byRate) && n != nil && n.kind == stringNode {
			if _, err := quantity.Parse(n.text, quantity.Frequency); err == nil {
				k.fail(n, names[i], "%q is a frequency, a rate is per second; for a full width at half maximum write %s = %q, for a rate Γ multiply by 2π and write \"… /s\"", n.text, names[byLinewidth], n.text)
			}
		}
		k.number(names[i], &fields[i], kinds[i], docs[i])
	}
	if k.r.listing {
		return byLifetime, none
	}
	if len(there) > 1 {
		k.fail(there[1], there[1].key, "stands beside %s; give exactly one of %s", there[0].key, orList(names[:]))
	}
	for i, f := range fields {
		if f != none {
			return given(i), f
		}
	}
	if len(there) == 0 {
		k.fail(nil, "", "give exactly one of %s", orList(names[:]))
	}
	return byLifetime, none
}

func (r *reader) readDephasings() {
	r.blocks("dephasing", "one for each cause", func(k *keys, name string, n *node) {
		d := &weighted{name: name}
		k.weights(d, "how far level %s moves when the cause does")
		d.given, d.size = k.rate(
			[3]string{"time", "linewidth", "rate"},
			[3]string{"pure dephasing time Tφ (not T2: 1/T2 = 1/(2·lifetime) + 1/Tφ for two levels)", "full width 1/(πTφ) of the line, pure dephasing alone", "pure dephasing rate 1/Tφ"})
		k.done()
		r.e.shape.dephasings = append(r.e.shape.dephasings, d)
	})
}

func (r *reader) readShifts() {
	r.blocks("shift", "one for each cause", func(k *keys, name string, n *node) {
		s := &weighted{name: name}
		k.weights(s, "shift of level %s over the size")
		k.number("size", &s.size, frequency.or(0), "shift of a level of weight one")
		k.done()
		r.e.shape.shifts = append(r.e.shape.shifts, s)
	})
}

func (k *keys) weights(w *weighted, doc string) {
	n := k.table("weights", "table of levels", "a weight for each level that moves")
	if k.r.listing {
		return
	}
	if n == nil || len(n.children) == 0 {
		if k.n.child("weights") == nil || n != nil {
			k.fail(n, "weights", "is missing: name the levels that move, as in { e = 1.0 }")
		}
		return
	}
	sub := k.r.keys(n, n.path)
	for _, c := range n.children {
		if a := k.r.level(c, c.key, c.path); a >= 0 {
			w.levels = append(w.levels, a)
			w.weights = append(w.weights, sub.quantity(c, c.key, number, replaceName(doc, c.key)))
		}
	}
}

// replaceName puts a name into a sentence of the manual.
func replaceName(doc, name string) string { return strings.Replace(doc, "%s", name, 1) }
