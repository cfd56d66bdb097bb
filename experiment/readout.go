package experiment

import (
	"math"

	"gonum.org/v1/gonum/num/dual"
)

// readout is the [readout] block: how the signal follows from the state.
type readout struct {
	what       readoutKind
	bright     []int // levels
	brightness []field
	pairs      [][2]int // coherences, lower level first
	elements   []field
	phase      field
	counted    []int // decays whose photons are read
	during     int   // step whose photons are counted, −1: the rate at the end
	among      []int
	sd         field
	shots      field
	falseBright,
	falseDark field
}

type readoutKind int

const (
	readBright    readoutKind = iota // probability to be called bright
	readCoherence                    // a component of coherences
	readEmission                     // photons
)

func (r *reader) readReadout() {
	top := r.top("readout")
	if top == nil && !r.listing {
		return
	}
	k := r.keys(top, "readout")
	o := &readout{during: -1, phase: none}
	bright := k.find("bright", "level, list of levels or table of brightnesses", "what counts as bright")
	coherence := k.find("coherence", "pair or table of pairs", "coherences that are read, lower level first: signal = Σ c 2 Re(ρ e^{−i phase})")
	emission := k.texts("emission", "decays whose photons are read: their rate at the end or, with during, their mean number")
	var during string
	duringNode := k.text("during", &during, "step whose photons are counted, in all its repeats")
	among := k.texts("among", "levels by whose population the signal is divided")
	k.number("phase", &o.phase, angle, "phase of the drive along whose axis a coherence is read")
	k.number("sd", &o.sd, number.from(0).or(0), "standard deviation of one shot beyond counting")
	k.number("shots", &o.shots, number.from(1).wholly(), "shots for each point")
	o.falseBright, o.falseDark = none, none
	if bright != nil || r.listing {
		k.number("false-bright", &o.falseBright, probability.or(0).offAt(0), "probability that a dark atom is called bright")
		k.number("false-dark", &o.falseDark, probability.or(0).offAt(0), "probability that a bright atom is called dark")
	} else {
		for _, key := range []string{"false-bright", "false-dark"} {
			if n := k.find(key, "number", ""); n != nil {
				k.fail(n, key, "belongs to a readout of bright levels")
			}
		}
	}
	k.done()
	if r.listing {
		return
	}
	r.e.shape.readout = o
	given := 0
	for _, n := range []*node{bright, coherence, top.child("emission")} {
		if n != nil {
			given++
		}
	}
	if given != 1 {
		k.fail(nil, "", "give exactly one of bright, coherence and emission")
		return
	}
	switch {
	case bright != nil:
		r.readBright(k, o, bright)
	case coherence != nil:
		r.readCoherence(k, o, coherence)
	default:
		r.readEmission(k, o, emission)
	}
	if duringNode != nil {
		if o.what != readEmission {
			k.fail(duringNode, "during", "belongs to a readout of emission")
		} else {
			o.during = r.playedStep(duringNode, during)
		}
	}
	for _, c := range among {
		if a := r.level(c, c.text, k.path+".among"); a >= 0 {
			o.among = append(o.among, a)
		}
	}
}

func (r *reader) readBright(k *keys, o *readout, n *node) {
	o.what = readBright
	if n.kind != tableNode {
		for _, c := range k.textsOf(n, "bright") {
			if a := r.level(c, c.text, k.path+".bright"); a >= 0 {
				o.bright, o.brightness = append(o.bright, a), append(o.brightness, none)
			}
		}
		return
	}
	sub := r.keys(n, n.path)
	for _, c := range n.children {
		if a := r.level(c, c.key, c.path); a >= 0 {
			o.bright = append(o.bright, a)
			o.brightness = append(o.brightness, sub.quantity(c, c.key, probability, "probability that level "+c.key+" is bright"))
		}
	}
}

func (r *reader) readCoherence(k *keys, o *readout, n *node) {
	o.what = readCoherence
	if o.phase == none && k.n.child("phase") == nil {
		k.fail(n, "phase", "is missing: name the phase of the drive along whose axis the coherence is read")
	}
	pair := func(n *node, text string, f field) {
		if a, b, ok := r.pair(n, text, n.path); ok {
			o.pairs, o.elements = append(o.pairs, [2]int{a, b}), append(o.elements, f)
		}
	}
	switch n.kind {
	case stringNode:
		pair(n, n.text, none)
	case tableNode:
		sub := r.keys(n, n.path)
		for _, c := range n.children {
			pair(c, c.key, sub.quantity(c, c.key, number, "weight of coherence "+c.key+" in the signal"))
		}
	default:
		k.fail(n, "coherence", "must be a pair \"g:e\" or a table of pairs")
	}
}

func (r *reader) readEmission(k *keys, o *readout, names []*node) {
	o.what = readEmission
	var known []string
	for _, d := range r.e.shape.decays {
		known = append(known, d.name)
	}
	for _, c := range names {
		kind, i, ok := r.e.shape.block(c.text)
		if !ok || kind != decayBlock {
			k.fail(c, "emission", "there is no decay %q%s", c.text, didYouMean(c.text, known))
			continue
		}
		for _, j := range o.counted {
			if i == j {
				k.fail(c, "emission", "names the decay %q twice", c.text)
			}
		}
		o.counted = append(o.counted, i)
	}
}

// unit is the SI unit of the signal, and about says what it is.
func (o *readout) unit() (unit, about string) {
	switch {
	case o.what == readBright:
		return "1", "probability to be found bright"
	case o.what == readCoherence:
		return "1", "component of the coherence read"
	case o.during >= 0:
		return "1", "mean number of photons"
	}
	return "1/s", "photons per second"
}

// averages is what the readout sees: states averaged over shots, as dual
// numbers.
type averages struct {
	population func(level int) dual.Number
	coherence  func(a, b int) (re, im dual.Number)
	photons    dual.Number
}

// signal is the readout of an averaged state; x are the settled dials. It is
// NaN where the population among which it is read is zero.
func (o *readout) signal(x []dual.Number, of averages) dual.Number {
	var s dual.Number
	switch o.what {
	case readBright:
		for i, a := range o.bright {
			p := of.population(a)
			if f := o.brightness[i]; f != none {
				p = dual.Mul(p, x[f])
			}
			s = dual.Add(s, p)
		}
	case readCoherence:
		c, d := dual.Cos(x[o.phase]), dual.Sin(x[o.phase])
		for i, p := range o.pairs {
			re, im := of.coherence(p[0], p[1])
			t := dual.Scale(2, dual.Add(dual.Mul(re, c), dual.Mul(im, d)))
			if f := o.elements[i]; f != none {
				t = dual.Mul(t, x[f])
			}
			s = dual.Add(s, t)
		}
	case readEmission:
		s = of.photons
	}
	if len(o.among) > 0 {
		var sum dual.Number
		for _, a := range o.among {
			sum = dual.Add(sum, of.population(a))
		}
		s = dual.Mul(s, dual.Inv(sum))
	}
	if o.what == readBright {
		fb, fd := x[o.falseBright], x[o.falseDark]
		span := dual.Sub(dual.Sub(dual.Number{Real: 1}, fb), fd)
		s = dual.Add(fb, dual.Mul(span, s))
	}
	return s
}

// deviation is the standard error of the mean of shots: √((s(1 − s) + sd²)/n)
// for bright, sd/√n for a coherence, √((s + sd²)/n) for photons. It stays out of
// dual numbers: the slope of a root at zero is infinite.
func (o *readout) deviation(signal float64, x []dual.Number) float64 {
	sd, n := x[o.sd].Real, x[o.shots].Real
	variance := sd * sd
	switch o.what {
	case readBright:
		s := math.Min(1, math.Max(0, signal))
		variance += s * (1 - s)
	case readEmission:
		variance += math.Max(0, signal)
	}
	return math.Sqrt(variance / n)
}
