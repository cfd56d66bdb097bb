package lindblad

import "math"

// groupMap is the propagator of one pass through a group, and its powers.
type groupMap struct {
	exact    bool
	lasts    float64
	stretchs int        // plays of a stretch in one pass
	powers   []product_ // 2^i passes
}

// product_ is a propagator with slopes for all directions, one after the other.
type product_ = []float64

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
		build += float64(g.stretchs) * n * n * n * (1 + 2*k)
	}
	return build+bits*n*n*(1+2*k) < float64(m)*float64(g.stretchs)*n*n*(1+2*k)
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
		g.exact = g.exact && s.exact(st)
		g.stretchs += times
		if !st.Ideal {
			g.lasts += float64(times) * st.Lasts
		}
	}
}

// applyPower applies m passes of a group.
func (s *Solver) applyPower(node *Node, g *groupMap, m int) {
	if g.powers == nil {
		one := s.zeroMap()
		s.compose(&one, node.Group)
		g.powers = append(g.powers, one)
	}
	for 1<<len(g.powers) <= m {
		last := g.powers[len(g.powers)-1]
		next := s.zeroMap()
		s.chain(next, last, last)
		g.powers = append(g.powers, next)
	}
	n := s.l.n
	p := parts{e: make([][]float64, s.k)}
	for i := range g.powers {
		if m>>i&1 == 1 {
			p.q = g.powers[i][:n*n]
			for j := range p.e {
				p.e[j] = g.powers[i][(1+j)*n*n : (2+j)*n*n]
			}
			s.apply(p)
		}
	}
}

func (s *Solver) zeroMap() product_ { return make([]float64, (1+s.k)*s.l.n*s.l.n) }

// compose multiplies the maps of an order onto *m from the left.
func (s *Solver) compose(m *product_, order []Node) {
	for i := range order {
		node := &order[i]
		if node.Group != nil {
			if node.Repeat == 0 || len(node.Group) == 0 {
				continue
			}
			power := s.zeroMap()
			s.compose(&power, node.Group)
			for r := node.Repeat; r > 0; r >>= 1 {
				if r&1 == 1 {
					t := s.zeroMap()
					s.chain(t, power, *m)
					*m = t
				}
				if r > 1 {
					t := s.zeroMap()
					s.chain(t, power, power)
					power = t
				}
			}
			continue
		}
		t := s.zeroMap()
		s.chain(t, s.stretchMap(node.Stretch), *m)
		*m = t
	}
}

// stretchMap is the map of a constant stretch with the slopes of its duration.
func (s *Solver) stretchMap(i int) product_ {
	st := &s.stretches[i]
	n := s.l.n
	m := s.zeroMap()
	duration := st.Lasts
	if st.Ideal {
		duration = 1
	}
	p := s.propagator(st, duration)
	copy(m, p.q)
	for j := range p.e {
		if p.e[j] != nil {
			copy(m[(1+j)*n*n:], p.e[j])
		}
	}
	if st.Ideal || !s.slides(st) {
		return m
	}
	s.l.generator(s.needVals(), st.Coef)
	lp := make([]float64, n*n)
	s.l.dense(lp, s.vals, 1)
	product(lp, append([]float64(nil), lp...), p.q, n, true) // L + LQ
	for j := range st.Slopes {
		if d := st.Slopes[j].Lasts; d != 0 {
			for i, v := range lp {
				m[(1+j)*n*n+i] += v * d
			}
		}
	}
	return m
}

// chain sets c to the map a after b: Q = Q_a + Q_b + Q_a Q_b.
func (s *Solver) chain(c, a, b product_) {
	s.exp.n, s.exp.pops = s.l.n, s.l.pops
	s.exp.multiply(c, a, b, s.k)
	for i := range c {
		c[i] += a[i] + b[i]
	}
	s.exp.conserve(c, s.k)
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
