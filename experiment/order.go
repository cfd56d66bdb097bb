package experiment

import (
	"fmt"
	"math"
	"strings"

	"rhotrace/lindblad"
)

// mostSteps is how many steps an order may play.
const mostSteps = 10_000_000

// sequence is the [sequence] block.
type sequence struct {
	order []orderNode
	dead  field
	node  *node
}

// orderNode is a step, or a group in brackets, played several times.
type orderNode struct {
	step   int
	group  []orderNode // nil: a step
	count  int         // times, when number is none
	number field       // dial with the number of times
}

// parseOrder reads an order line: steps in order, "8*(flip gap)" repeats a
// group, "2*gap" a step; "n*(…)" takes the number from a key of that name.
func parseOrder(text string, step func(name string) (int, error), number func(name string) (field, error)) ([]orderNode, error) {
	p := orderParser{tokens: orderTokens(text), step: step, number: number}
	nodes, err := p.list(0)
	if err == nil && p.at < len(p.tokens) {
		err = fmt.Errorf("a closing bracket has no opening one; take it out or put a ( before the group")
	}
	if err == nil && len(nodes) == 0 {
		err = fmt.Errorf("the order is empty; name the steps in order, as in \"half dark half\"")
	}
	return nodes, err
}

type orderParser struct {
	tokens []string
	at     int
	step   func(string) (int, error)
	number func(string) (field, error)
}

func orderTokens(text string) []string {
	for _, c := range []string{"(", ")", "*"} {
		text = strings.ReplaceAll(text, c, " "+c+" ")
	}
	return strings.Fields(text)
}

func (p *orderParser) peek() string {
	if p.at < len(p.tokens) {
		return p.tokens[p.at]
	}
	return ""
}

const deepest = 64

func (p *orderParser) list(depth int) ([]orderNode, error) {
	if depth > deepest {
		return nil, fmt.Errorf("brackets are nested more than %d deep", deepest)
	}
	nodes := []orderNode{}
	for p.at < len(p.tokens) && p.peek() != ")" {
		n, err := p.item(depth)
		if err != nil {
			return nil, err
		}
		nodes = append(nodes, n)
	}
	return nodes, nil
}

func (p *orderParser) item(depth int) (orderNode, error) {
	word := p.peek()
	n := orderNode{count: 1, number: none}
	if p.at+1 < len(p.tokens) && p.tokens[p.at+1] == "*" {
		if err := p.times(word, &n); err != nil {
			return n, err
		}
		p.at += 2
		word = p.peek()
	}
	switch word {
	case "*":
		return n, fmt.Errorf("a * needs a number on its left, as in 8*(flip gap)")
	case "", ")":
		return n, fmt.Errorf("nothing follows a *; write a step or a group in brackets")
	case "(":
		p.at++
		group, err := p.list(depth + 1)
		if err != nil {
			return n, err
		}
		if p.peek() != ")" {
			return n, fmt.Errorf("an opening bracket is never closed; put a ) behind the group")
		}
		if len(group) == 0 {
			return n, fmt.Errorf("a pair of brackets holds no step")
		}
		p.at++
		n.group = group
		return n, nil
	}
	i, err := p.step(word)
	p.at++
	n.step = i
	return n, err
}

func (p *orderParser) times(word string, n *orderNode) (err error) {
	if strings.ContainsAny(word, "()*") {
		return fmt.Errorf("a * needs a number on its left, as in 8*(flip gap)")
	}
	if word[0] >= '0' && word[0] <= '9' {
		n.count = 0
		for _, c := range word {
			if c < '0' || c > '9' {
				return fmt.Errorf("%q is not a whole number", word)
			}
			if n.count = n.count*10 + int(c-'0'); n.count > mostSteps {
				return fmt.Errorf("%s repeats are too many: an order plays at most %d steps", word, mostSteps)
			}
		}
		return nil
	}
	if word[0] == '-' {
		return fmt.Errorf("%q: the number of repeats cannot be negative", word)
	}
	n.number, err = p.number(word)
	return err
}

// times is how often a node plays.
func (n *orderNode) times(values []float64) int {
	if n.number != none {
		return int(values[n.number])
	}
	return n.count
}

// played counts the steps that an order plays, as a float so that nothing
// overflows.
func played(nodes []orderNode, values []float64) float64 {
	sum := 0.0
	for i := range nodes {
		inside := 1.0
		if nodes[i].group != nil {
			inside = played(nodes[i].group, values)
		}
		sum += float64(nodes[i].times(values)) * inside
	}
	return sum
}

// checkLength holds the bound on the number of steps.
func (s *sequence) checkLength(values []float64) error {
	if n := played(s.order, values); n > mostSteps {
		return fmt.Errorf("the order plays %.3g steps; at most %d are allowed", n, mostSteps)
	}
	return nil
}

// tree writes the order for the engine, reusing dst.
func tree(dst []lindblad.Node, nodes []orderNode, values []float64) []lindblad.Node {
	dst = dst[:0]
	for i := range nodes {
		n := &nodes[i]
		out := lindblad.Node{Stretch: n.step, Repeat: n.times(values)}
		switch {
		case n.group != nil:
			out.Group = tree(nil, n.group, values)
		case out.Repeat != 1:
			out.Group = []lindblad.Node{{Stretch: n.step}}
		}
		dst = append(dst, out)
	}
	return dst
}

// total is the time that an order takes when step i lasts lasts(i).
func total(nodes []orderNode, values []float64, lasts func(step int) float64) float64 {
	sum := 0.0
	for i := range nodes {
		inside := 0.0
		if nodes[i].group != nil {
			inside = total(nodes[i].group, values, lasts)
		} else {
			inside = lasts(nodes[i].step)
		}
		sum += float64(nodes[i].times(values)) * inside
	}
	return sum
}

// uses reports which steps an order names.
func uses(nodes []orderNode, used []bool) {
	for i := range nodes {
		if nodes[i].number == none && nodes[i].count == 0 {
			continue
		}
		if nodes[i].group != nil {
			uses(nodes[i].group, used)
		} else {
			used[nodes[i].step] = true
		}
	}
}

func (r *reader) readSequence() {
	s := r.e.shape
	top := r.top("sequence")
	k := r.keys(top, "sequence")
	if top != nil && top.kind != tableNode {
		r.fail(top, "sequence", "must be a table: write [sequence] with order = \"…\"")
		return
	}
	var text string
	n := k.text("order", &text, "steps in order; 8*(flip gap) repeats, n*(flip gap) with a key n too")
	k.number("dead", &s.sequence.dead, timeSpan.or(0), "time per shot beyond the steps")
	if r.listing {
		return
	}
	s.sequence.node = n
	if n == nil || n.kind != stringNode {
		if n == nil {
			r.fail(top, "sequence.order", "is missing: name the steps in order, as in order = \"half dark half\"")
		}
		return
	}
	var stepNames, counts []string
	for _, st := range s.steps {
		stepNames = append(stepNames, st.name)
	}
	fields := map[string]field{}
	order, err := parseOrder(text,
		func(name string) (int, error) {
			for i, st := range s.steps {
				if st.name == name {
					return i, nil
				}
			}
			return 0, fmt.Errorf("there is no step %q%s", name, didYouMean(name, stepNames))
		},
		func(name string) (field, error) {
			if f, there := fields[name]; there {
				return f, nil
			}
			c := k.n.child(name)
			if c == nil || name == "order" || name == "dead" {
				return none, fmt.Errorf("%s*(…) needs the number of repeats: add the key %s = 8 to [sequence]", name, name)
			}
			f := k.quantity(c, name, number.from(0).to(mostSteps).wholly(), "number of repeats "+name)
			fields[name] = f
			counts = append(counts, name)
			return f, nil
		})
	if err != nil {
		r.fail(n, "sequence.order", "%v", err)
		return
	}
	k.done(counts...)
	s.sequence.order = order
	if r.first != nil {
		return
	}
	if err := s.sequence.checkLength(r.e.values); err != nil {
		r.fail(n, "sequence.order", "%v", err)
	}
	used := make([]bool, len(s.steps))
	uses(order, used)
	for i, st := range s.steps {
		if !used[i] {
			r.warnings = append(r.warnings, fmt.Sprintf("step.%s: the order does not name this step", joinKey(st.name)))
		}
	}
}

// start is the [start] block: the state before the first step.
type start struct {
	levels      []int   // with populations, in the order of the file
	populations []field // none: what the others leave (the first)
	phased      []int   // levels that form one superposition
	phases      []field
}

func (r *reader) readStart() {
	s := &r.e.shape.start
	top := r.top("start")
	k := r.keys(top, "start")
	pops := k.table("populations", "table of levels", "share of each level; they sum to one")
	phases := k.table("phases", "table of levels", "phase of each level of one superposition")
	k.done()
	if r.listing {
		return
	}
	s.levels, s.populations = []int{0}, []field{none}
	if pops != nil {
		s.levels, s.populations = nil, nil
		r.populations(pops, s)
	}
	if phases == nil {
		return
	}
	sub := r.keys(phases, phases.path)
	for _, c := range phases.children {
		if a := r.level(c, c.key, c.path); a >= 0 {
			s.phased = append(s.phased, a)
			s.phases = append(s.phases, sub.quantity(c, c.key, angle, "phase of level "+c.key+" in the superposition at the start"))
		}
	}
}

func (r *reader) populations(n *node, s *start) {
	sum := 0.0
	for i, c := range n.children {
		a := r.level(c, c.key, c.path)
		v, ok := r.value(c, probability)
		if wrong := (&Dial{Low: 0, High: 1, dimension: probability.dimension}).check(v); ok && wrong != "" {
			r.fail(c, c.path, "%s", wrong)
		}
		sum += v
		f := none
		if i > 0 {
			f = r.e.addDial(c.path, probability, "population of "+c.key+" at the start; the first level named takes the rest", v, c)
		}
		s.levels, s.populations = append(s.levels, a), append(s.populations, f)
	}
	if math.Abs(sum-1) > 1e-3 {
		r.fail(n, n.path, "the populations sum to %g; they must sum to one", sum)
		return
	}
	for _, f := range s.populations {
		if f != none {
			r.e.values[f] /= sum
		}
	}
}

// check holds that the first level is left with a population.
func (s *start) check(values []float64) error {
	sum := 0.0
	for _, f := range s.populations {
		if f != none {
			sum += values[f]
		}
	}
	if sum > 1+1e-12 {
		return fmt.Errorf("start.populations: the others sum to %g and leave less than nothing to the first level", sum)
	}
	return nil
}
