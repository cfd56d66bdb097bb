package lindblad

import (
	"fmt"
	"math"
	"math/cmplx"
)

// negligible is the size of an entry, relative to the sum of the absolute
// contributions to that entry, below which it is what rounding left of zero.
const negligible = 1e-15

// Every piece but a count is ρ → Kρ + ρK† + Σ (A ρ B† + B ρ A†)/(1 or 2):
//
//	−i[h, ρ]:  K = −ih;   jump c:  K = −½c†c and cρc†.
//
// sparse is a matrix by columns; abs is the sum of the absolute contributions.
type sparse struct {
	start []int32
	row   []int32
	val   []complex128
	abs   []float64
}

// compiled is a piece ready to be applied to |a⟩⟨b|.
type compiled struct {
	kind kind
	a, b int
	k    sparse
	ops  []sparse // jumps, one after the other; a cross jump has two
}

// columns applies pieces to basis matrices and gathers the result, element by
// element, in scratch space of N² elements.
type columns struct {
	levels  int
	pieces  []compiled
	upper   []complex128 // elements (r, s), r ≤ s
	lower   []complex128 // conjugates of the elements (s, r), r < s
	size    []float64    // sum of absolute contributions
	seen    []bool
	touched []int32
}

func (w *columns) add(r, s int, v complex128, all float64) {
	if r <= s {
		i := r*w.levels + s
		w.touch(i)
		w.upper[i] += v
		w.size[i] += all
		return
	}
	i := s*w.levels + r
	w.touch(i)
	w.lower[i] += complex(real(v), -imag(v))
	w.size[i] += all
}

func (w *columns) touch(i int) {
	if !w.seen[i] {
		w.seen[i] = true
		w.touched = append(w.touched, int32(i))
	}
}

func (w *columns) clear() {
	for _, i := range w.touched {
		w.seen[i], w.upper[i], w.lower[i], w.size[i] = false, 0, 0, 0
	}
	w.touched = w.touched[:0]
}

// reset compiles the pieces.
func (w *columns) reset(levels int, pieces []Piece, counters int) error {
	w.levels = levels
	if n := levels * levels; len(w.upper) < n {
		w.upper, w.lower = make([]complex128, n), make([]complex128, n)
		w.size, w.seen = make([]float64, n), make([]bool, n)
	}
	if cap(w.pieces) < len(pieces) {
		w.pieces = append(w.pieces[:cap(w.pieces)], make([]compiled, len(pieces)-cap(w.pieces))...)
	}
	w.pieces = w.pieces[:len(pieces)]
	for i := range pieces {
		p := &pieces[i]
		if err := p.check(levels, counters); err != nil {
			return fmt.Errorf("lindblad: piece %d: %w", i, err)
		}
		if err := w.compile(&w.pieces[i], p); err != nil {
			return fmt.Errorf("lindblad: piece %d: %w", i, err)
		}
	}
	return nil
}

func (w *columns) compile(c *compiled, p *Piece) error {
	c.kind, c.a, c.b = p.kind, p.a, p.b
	c.ops = c.ops[:0]
	switch p.kind {
	case hamiltonian:
		for _, e := range p.op {
			w.add2(e.Row, e.Col, -1i*e.Value, size(e.Value))
		}
		w.gather(&c.k)
		return w.hermitian(p.op, "a Hamiltonian")
	case jump:
		w.operator(c, p.op)
		w.square(p.op, p.op)
		w.gather(&c.k)
	case jumps:
		for _, o := range p.ops {
			w.operator(c, o)
		}
		for _, o := range p.ops {
			w.square(o, o)
		}
		w.gather(&c.k)
	case crossJump:
		w.operator(c, p.op)
		w.operator(c, p.other)
		w.square(p.other, p.op)
		w.square(p.op, p.other)
		w.gather(&c.k)
	case damping:
		if c.a > c.b {
			c.a, c.b = c.b, c.a
		}
	case count:
		for _, e := range p.op {
			w.add2(e.Row, e.Col, e.Value, size(e.Value))
		}
		w.gather(&c.k)
		return w.hermitian(p.op, "the operator of a count")
	}
	return nil
}

// hermitian complains unless o equals its adjoint to rounding.
func (w *columns) hermitian(o Operator, what string) error {
	defer w.clear()
	for _, e := range o {
		w.add2(e.Row, e.Col, e.Value, size(e.Value))
		w.add2(e.Col, e.Row, -cmplx.Conj(e.Value), size(e.Value))
	}
	for _, i := range w.touched {
		if size(w.upper[i]) > 1e-12*w.size[i] {
			return fmt.Errorf("%s must be Hermitian; element (%d, %d) is not the conjugate of its mirror image",
				what, int(i)/w.levels, int(i)%w.levels)
		}
	}
	return nil
}

// add2 adds to element (r, s) as it stands, above or below the diagonal.
func (w *columns) add2(r, s int, v complex128, all float64) {
	i := r*w.levels + s
	w.touch(i)
	w.upper[i] += v
	w.size[i] += all
}

// square adds −½ a†b.
func (w *columns) square(a, b Operator) {
	for _, e := range a {
		for _, f := range b {
			if e.Row == f.Row {
				v := -0.5 * cmplx.Conj(e.Value) * f.Value
				w.add2(e.Col, f.Col, v, size(v))
			}
		}
	}
}

func (w *columns) operator(c *compiled, o Operator) {
	for _, e := range o {
		w.add2(e.Row, e.Col, e.Value, size(e.Value))
	}
	if len(c.ops) < cap(c.ops) {
		c.ops = c.ops[:len(c.ops)+1]
	} else {
		c.ops = append(c.ops, sparse{})
	}
	w.gather(&c.ops[len(c.ops)-1])
}

// gather moves what was added into m, by columns, and clears the scratch space.
func (w *columns) gather(m *sparse) {
	n := w.levels
	m.start = zeroed(m.start, n+1)
	kept := 0
	for _, i := range w.touched {
		if size(w.upper[i]) > negligible*w.size[i] {
			m.start[int(i)%n+1]++
			kept++
		}
	}
	for j := 0; j < n; j++ {
		m.start[j+1] += m.start[j]
	}
	m.row, m.val, m.abs = sized(m.row, kept), sized(m.val, kept), sized(m.abs, kept)
	for _, i := range w.touched {
		if size(w.upper[i]) > negligible*w.size[i] {
			j := int(i) % n
			p := m.start[j]
			m.start[j]++
			m.row[p], m.val[p], m.abs[p] = i/int32(n), w.upper[i], w.size[i]
		}
	}
	copy(m.start[1:], m.start[:n])
	m.start[0] = 0
	w.clear()
}

// apply puts the image of |a⟩⟨b| under piece p (not a count) into the scratch
// space.
func (w *columns) apply(p *compiled, a, b int) {
	if p.kind == damping {
		if a == p.a && b == p.b {
			w.add(a, b, -1, 1)
		}
		return
	}
	for i := p.k.start[a]; i < p.k.start[a+1]; i++ {
		w.add(int(p.k.row[i]), b, p.k.val[i], p.k.abs[i])
	}
	for i := p.k.start[b]; i < p.k.start[b+1]; i++ {
		w.add(a, int(p.k.row[i]), cmplx.Conj(p.k.val[i]), p.k.abs[i])
	}
	if p.kind == crossJump {
		w.sandwich(&p.ops[0], &p.ops[1], a, b)
		w.sandwich(&p.ops[1], &p.ops[0], a, b)
		return
	}
	for q := range p.ops {
		w.sandwich(&p.ops[q], &p.ops[q], a, b)
	}
}

// sandwich adds A|a⟩⟨b|B†.
func (w *columns) sandwich(x, y *sparse, a, b int) {
	for i := x.start[a]; i < x.start[a+1]; i++ {
		for j := y.start[b]; j < y.start[b+1]; j++ {
			v := x.val[i] * cmplx.Conj(y.val[j])
			w.add(int(x.row[i]), int(y.row[j]), v, size(v))
		}
	}
}

// column calls put for each entry of the column of coordinate g in piece p.
// Rows are coordinates; N² + i is counter i.
func (w *columns) column(p *compiled, g int, put func(row int, v float64)) {
	n := w.levels
	if p.kind == nothing {
		return
	}
	a, b, part := g, g, -1
	if g >= n {
		a, b = pairOf(n, g)
		part = (g - n) % 2
	}
	if p.kind == count {
		if v := w.functional(&p.k, a, b, part); v != 0 {
			put(n*n+p.a, v)
		}
		return
	}
	w.apply(p, a, b)
	for _, i := range w.touched {
		r, s := int(i)/n, int(i)%n
		u, v, tiny := w.upper[i], w.lower[i], negligible*w.size[i]
		var re, im float64
		switch {
		case r == s:
			switch part {
			case -1:
				re = real(u)
			case 0:
				re = math.Sqrt2 * real(u)
			case 1:
				re = -math.Sqrt2 * imag(u)
			}
			if math.Abs(re) > tiny {
				put(r, re)
			}
			continue
		case part == -1:
			re, im = real(u+v)/math.Sqrt2, imag(u+v)/math.Sqrt2
		case part == 0:
			re, im = real(u+v), imag(u+v)
		default:
			re, im = -imag(u-v), real(u-v)
		}
		row := pairAt(n, r, s)
		if math.Abs(re) > tiny {
			put(row, re)
		}
		if math.Abs(im) > tiny {
			put(row+1, im)
		}
	}
	w.clear()
}

// functional returns Tr(oB) for the basis matrix of a coordinate.
func (w *columns) functional(o *sparse, a, b, part int) float64 {
	at := func(r, c int) complex128 {
		for i := o.start[c]; i < o.start[c+1]; i++ {
			if int(o.row[i]) == r {
				return o.val[i]
			}
		}
		return 0
	}
	switch part {
	case -1:
		return real(at(a, a))
	case 0:
		return real(at(a, b)+at(b, a)) / math.Sqrt2
	default:
		return imag(at(a, b)-at(b, a)) / math.Sqrt2
	}
}

// size is between |z| and √2|z|.
func size(z complex128) float64 { return math.Abs(real(z)) + math.Abs(imag(z)) }

// sized returns s with length n, reusing its memory; contents are arbitrary.
func sized[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// zeroed returns s with length n, all zero, reusing its memory.
func zeroed[T any](s []T, n int) []T {
	s = sized(s, n)
	clear(s)
	return s
}
