package experiment

import (
	"fmt"

	"rhotrace/io/quantity"
)

// userDial is a [dial.NAME] block: it turns other dials by weight × value.
type userDial struct {
	name     string
	value    field
	targets  []target
	relative bool
}

// target is what a user dial or a spread turns: the polynomial
// Σ weights[k]·value^(k+1) is added to the dial, or one plus it multiplies it.
type target struct {
	dial    field
	weights []float64
}

var baseDimensions = []quantity.Dimension{quantity.One, quantity.Time, quantity.Frequency, quantity.Rate, quantity.Angle,
	quantity.Field, quantity.Power, quantity.Intensity, quantity.Length, quantity.Temperature, quantity.Mass,
	quantity.Velocity, quantity.Voltage, quantity.Current, quantity.Pressure}

// dimensionOf finds what a text measures.
func dimensionOf(text string) (quantity.Dimension, bool) {
	for _, d := range baseDimensions {
		if _, err := quantity.Parse(text, d); err == nil {
			return d, true
		}
	}
	return quantity.One, false
}

// readUserDials makes the dials; what they turn is resolved by turnUserDials
// once every dial is known.
func (r *reader) readUserDials() {
	r.blocks("dial", "one for each knob of your own", func(k *keys, name string, n *node) {
		u := &userDial{name: name, value: none}
		r.e.shape.userDials = append(r.e.shape.userDials, u)
		turns := k.table("turns", "table of dials", "weight of each dial that it turns; a list of weights belongs to value, value², …")
		k.flag("relative", &u.relative, "multiply by 1 + weight × value instead of adding")
		dim := quantity.One
		if r.listing {
			k.number("value", &u.value, number.or(0), "value of the knob, in a unit of your choice")
			return
		}
		if turns == nil || len(turns.children) == 0 {
			k.fail(turns, "turns", "is missing: name the dials, as in { \"shift.zeeman.size\" = \"1.4 MHz/G\" }")
			return
		}
		if v := n.child("value"); v != nil && v.kind == stringNode {
			if d, ok := dimensionOf(v.text); ok {
				dim = d
			}
		} else if v == nil {
			dim = dimensionUnder(turns)
		}
		k.number("value", &u.value, of(dim).or(0), "value of the knob "+name)
		k.done()
	})
}

// dimensionUnder guesses the dimension of a knob without a value from the
// units under the strokes of its weights.
func dimensionUnder(turns *node) quantity.Dimension {
	for _, c := range turns.children {
		if c.kind == arrayNode && len(c.children) > 0 {
			c = c.children[0]
		}
		if c.kind != stringNode {
			continue
		}
		for _, d := range baseDimensions {
			for _, over := range baseDimensions {
				if _, err := quantity.Parse(c.text, quantity.Per(over, d, 1)); err == nil && d != quantity.One {
					return d
				}
			}
		}
	}
	return quantity.One
}

func (r *reader) turnUserDials() {
	for _, u := range r.e.shape.userDials {
		n := r.e.shape.root.child("dial").child(u.name)
		turns := n.child("turns")
		if u.value == none || turns == nil {
			continue
		}
		for _, c := range turns.children {
			if t, ok := r.target(c, c.key, r.e.shape.dials[u.value].dimension, u.relative); ok {
				u.targets = append(u.targets, t)
			}
		}
	}
}

// target reads one dial with its weight or weights.
func (r *reader) target(n *node, path string, by quantity.Dimension, relative bool) (target, bool) {
	i, err := r.e.lookup(path)
	if err != nil {
		r.fail(n, n.path, "%v", err)
		return target{}, false
	}
	d := &r.e.shape.dials[i]
	if d.Whole {
		r.fail(n, n.path, "%s takes whole numbers and cannot be turned by another dial", d.Path)
		return target{}, false
	}
	t := target{dial: field(i)}
	list := []*node{n}
	if n.kind == arrayNode {
		list = n.children
	}
	for k, c := range list {
		dim := d.dimension
		if relative {
			dim = quantity.One
		}
		w, ok := r.value(c, of(perPower(dim, by, k+1)))
		if !ok {
			return t, false
		}
		t.weights = append(t.weights, w)
	}
	if len(list) == 0 {
		r.fail(n, n.path, "the list of weights is empty")
		return t, false
	}
	return t, true
}

// perPower is the dimension of a weight that turns value^k into a dial.
func perPower(dial, by quantity.Dimension, k int) quantity.Dimension {
	switch {
	case by == quantity.One:
		return dial
	case by == dial && k == 1:
		return quantity.One
	}
	return quantity.Per(dial, by, k)
}

// spread is a [spread.NAME] block: a dial that differs from shot to shot and is
// constant within one.
type spread struct {
	name     string
	dial     field
	sigma    field
	relative bool
}

func (r *reader) readSpreads() {
	r.blocks("spread", "one for each quantity that differs from shot to shot", func(k *keys, name string, n *node) {
		s := &spread{name: name, sigma: none}
		var path, shape string
		pathNode := k.text("dial", &path, "the dial that differs")
		shapeNode := k.text("shape", &shape, "distribution: gaussian")
		k.flag("relative", &s.relative, "sigma is a fraction of the dial")
		dim := quantity.One
		if r.listing {
			k.number("sigma", &s.sigma, frequency.from(0).offAt(0).need(), "standard deviation, in the dial's unit")
			return
		}
		defer func() { r.e.shape.spreads = append(r.e.shape.spreads, s) }()
		if pathNode == nil {
			k.fail(nil, "dial", "is missing: name the dial that differs from shot to shot")
			return
		}
		i, err := r.e.lookup(path)
		if err != nil {
			k.fail(pathNode, "dial", "%v", err)
			return
		}
		if r.e.shape.dials[i].Whole {
			k.fail(pathNode, "dial", "%s takes whole numbers and cannot spread", path)
		}
		if shapeNode != nil && shape != "gaussian" {
			k.fail(shapeNode, "shape", "there is no shape %q%s", shape, didYouMean(shape, []string{"gaussian"}))
		}
		s.dial = field(i)
		if !s.relative {
			dim = r.e.shape.dials[i].dimension
		}
		k.number("sigma", &s.sigma, of(dim).from(0).offAt(0).need(), fmt.Sprintf("standard deviation of %s from shot to shot", path))
		k.done()
	})
}
