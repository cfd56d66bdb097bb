package lindblad

import "math"

// groupMap is the propagator of one pass through a group, and its powers.
type groupMap struct {
	exact  bool
	lasts  float64
	plays  int     // of stretches, in one pass
	powers []*full // of 2^i passes, with slopes along all directions
}

// playGroup repeats a group: by powers of its propagator where no sample falls
// inside and that is cheaper, else pass by pass.
func (s *Solver) playGroup(node *Node) error {
	if node.Repeat == 0 || len(node.Group) == 0 {
		return nil
	}
	g := s.group(node)
	for done := 0; done < node.Repeat; {
		m := node.Repeat - done
		if s.rec.Samples > 0 && s.rec.During >= 0 && !s.clock.done {
			m = 0 // the recorded stretch may be inside
		} else if c := &s.clock; c.running && c.next < c.samples && g.lasts > 0 {
			m = int(math.Min(float64(m), math.Floor((c.at(c.next)-c.now+c.same)/g.lasts)))
		}
		if m > 1 && g.exact && s.powersPay(g, m) {
			s.applyPower(node, g, m)
			s.passGroup(node.Group, m)
			done += m
			continue
		}
		for m = max(m, 1); m > 0; m-- {
			if err := s.playAll(node.Group); err != nil {
				return err
			}
			done++
		}
	}
	return nil
}

// powersPay compares multiplications: matrices for the power against vectors
// for every stretch.
func (s *Solver) powersPay(g *groupMap, m int) bool {
	n, k := float64(s.l.n), float64(s.k)
	bits := math.Log2(float64(m))
	build := bits * n * n * n * (1 + 2*k)
	if g.powers == nil {
		build += float64(g.plays) * n * n * n * (1 + 2*k)
	}
	return build+bits*n*n*(1+2*k) < float64(m)*float64(g.plays)*n*n*(1+2*k)
}

func (s *Solver) group(node *Node) *groupMap {
	if g := s.groups[node]; g != nil {
		return g
	}
	g := &groupMap{exact: true}
	s.measure(node.Group, 1, g)
	if s.groups == nil {
		s.groups = map[*Node]*groupMap{}
	}
	s.groups[node] = g
	return g
}

func (s *Solver) measure(order []Node, times int, g *groupMap) {
	for i := range order {
		n := &order[i]
		if n.Group != nil {
			s.measure(n.Group, times*n.Repeat, g)
			continue
		}
		st := &s.stretches[n.Stretch]
		g.exact = g.exact && s.methods[n.Stretch] == byPropagator && !s.folds[n.Stretch]
		g.plays += times
		if !st.Ideal {
			g.lasts += float64(times) * st.Lasts
		}
	}
}

// applyPower applies m passes of a group.
func (s *Solver) applyPower(node *Node, g *groupMap, m int) {
	if g.powers == nil {
		g.powers = append(g.powers, s.compose(new(full), node.Group))
	}
	for 1<<len(g.powers) <= m {
		last := g.powers[len(g.powers)-1]
		g.powers = append(g.powers, s.chain(last, last))
	}
	var p propagator
	for j := range s.k {
		p.directions = append(p.directions, int32(j))
	}
	for i := range g.powers {
		if m>>i&1 == 1 {
			p.q = *g.powers[i]
			s.apply(&p)
			s.watch = math.Inf(1)
		}
	}
}

// compose returns the map of an order after the map m; an m without size is
// the identity.
func (s *Solver) compose(m *full, order []Node) *full {
	for i := range order {
		node := &order[i]
		if node.Group == nil {
			m = s.chain(s.stretchMap(node.Stretch), m)
			continue
		}
		if node.Repeat == 0 || len(node.Group) == 0 {
			continue
		}
		power := s.compose(new(full), node.Group)
		for r := node.Repeat; r > 0; r >>= 1 {
			if r&1 == 1 {
				m = s.chain(power, m)
			}
			if r > 1 {
				power = s.chain(power, power)
			}
		}
	}
	return m
}

// stretchMap is the map of a constant stretch with the slopes of its duration.
func (s *Solver) stretchMap(i int) *full {
	st := &s.stretches[i]
	duration := st.Lasts
	if st.Ideal {
		duration = 1
	}
	p := s.propagator(i, duration)
	m := new(full)
	m.reset(s.l, s.k)
	clear(m.a)
	copy(m.lo, p.q.lo)
	copy(m.hi, p.q.hi)
	copy(m.part(0), p.q.part(0))
	for q, j := range p.directions {
		copy(m.part(1+int(j)), p.q.part(1+q))
	}
	if st.Ideal || !s.slides(st) {
		return m
	}
	// ∂P/∂lasts = L + LQ
	var l, lq full
	l.reset(s.l, 0)
	l.likeLayout(s.l)
	s.l.generator(s.needVals(), st.Coef)
	l.put(s.l, 0, s.vals, 1)
	lq.reset(s.l, 0)
	clear(lq.a)
	p.q.k = 0
	lq.multiply(&l, &p.q)
	p.q.k = len(p.directions)
	m.widen(&lq)
	m.widen(&l)
	for j := range st.Slopes {
		if d := st.Slopes[j].Lasts; d != 0 {
			e := m.part(1 + j)
			for i := range e {
				e[i] += d * (l.a[i] + lq.a[i])
			}
		}
	}
	return m
}

// chain returns the map a after b: Q = Q_a + Q_b + Q_a Q_b.
func (s *Solver) chain(a, b *full) *full {
	if b.n == 0 {
		return a
	}
	c := new(full)
	c.reset(s.l, s.k)
	clear(c.a)
	c.multiply(a, b)
	c.addTo(a, 1)
	c.addTo(b, 1)
	c.conserve(s.l.pops, c.spareRows(nil, s.l.pops))
	return c
}

// passGroup moves clock and rotors on by m passes.
func (s *Solver) passGroup(order []Node, m int) {
	for i := range order {
		n := &order[i]
		if n.Group != nil {
			s.passGroup(n.Group, m*n.Repeat)
			continue
		}
		st := &s.stretches[n.Stretch]
		if st.Ideal || m == 0 {
			continue
		}
		long := *st
		f := float64(m)
		long.Lasts *= f
		long.Slopes = append([]Slope(nil), st.Slopes...)
		for j := range long.Slopes {
			long.Slopes[j].Lasts *= f
		}
		s.pass(&long)
	}
}
