package lindblad

import (
	"errors"
	"fmt"
)

// Support is the set of coordinates that can be non-zero at the start.
type Support struct {
	levels int
	has    []bool
}

// NewSupport returns the support of the given density matrices (N×N,
// row-major): start states, and slopes of start states, of one run or of all
// the runs that share a layout.
func NewSupport(levels int, rhos ...[]complex128) *Support {
	s := &Support{levels: levels, has: make([]bool, levels*levels)}
	for _, rho := range rhos {
		s.Add(rho)
	}
	return s
}

// Add joins the non-zero coordinates of rho to the support.
func (s *Support) Add(rho []complex128) {
	for g := range s.has {
		if coordinate(rho, s.levels, g) != 0 {
			s.has[g] = true
		}
	}
}

// AddElement joins ρ_ab, real and imaginary part, to the support.
func (s *Support) AddElement(a, b int) {
	if a == b {
		s.has[a] = true
		return
	}
	if a > b {
		a, b = b, a
	}
	k := pairAt(s.levels, a, b)
	s.has[k], s.has[k+1] = true, true
}

// Layout holds the pieces restricted to the coordinates that can become
// non-zero, on one sparsity pattern. It does not change once made and may be
// shared by goroutines.
type Layout struct {
	levels int
	reach  int     // coordinates of ρ
	n      int     // and counters
	index  []int   // coordinate → place in the state, −1 when not reachable
	global []int32 // and back
	pops   []int32 // places of the reachable populations

	start  []int32 // the pattern by rows: entries start[i] … start[i+1]−1 of row i
	col    []int32
	rows   [longRow + 1][]int32 // rows by their number of entries; the last: longer ones
	pieces []placed

	closure intervals // of the propagators
	made    uint64    // counts Set

	builder
}

// placed is a piece on the pattern.
type placed struct {
	at  []int32
	val []float64
}

// builder is the scratch space for making a layout.
type builder struct {
	columns
	ordering ordering
	queue    []int32
	entries  []triplet
	sorted   []triplet
	count    []int32
	atSlab   []int32
	valSlab  []float64
}

type triplet struct {
	row, col int32 // row: coordinate or N² + counter while building
	piece    int32
	val      float64
}

// NewLayout finds the coordinates that can become non-zero from the start
// support (nil: all coordinates) when any of the pieces may act, and restricts
// the pieces to them. A piece that no stretch uses should be the zero Piece:
// then fewer coordinates may be reachable. Operators outside the N levels or
// not Hermitian where they must be are errors.
func NewLayout(levels int, pieces []Piece, start *Support, counters int) (*Layout, error) {
	l := new(Layout)
	if err := l.Set(levels, pieces, start, counters); err != nil {
		return nil, err
	}
	return l, nil
}

// Set makes the layout anew, reusing its memory.
func (l *Layout) Set(levels int, pieces []Piece, start *Support, counters int) error {
	if levels < 1 || levels > 30000 {
		return fmt.Errorf("lindblad: %d levels; 1 to 30000 are wanted", levels)
	}
	if counters < 0 {
		return errors.New("lindblad: negative number of counters")
	}
	if start != nil && start.levels != levels {
		return fmt.Errorf("lindblad: the start support has %d levels, the layout %d", start.levels, levels)
	}
	if err := l.columns.reset(levels, pieces, counters); err != nil {
		return err
	}
	l.levels = levels
	l.made++
	l.search(start)
	l.place(len(pieces), counters)
	return nil
}

// search walks breadth first from the start support and gathers the entries
// of all pieces in the columns that it reaches.
func (l *Layout) search(start *Support) {
	n2 := l.levels * l.levels
	l.index = sized(l.index, n2)
	l.queue = l.queue[:0]
	for g := range l.index {
		l.index[g] = -1
		if start == nil || start.has[g] {
			l.index[g] = 0
			l.queue = append(l.queue, int32(g))
		}
	}
	l.entries = l.entries[:0]
	for i := 0; i < len(l.queue); i++ {
		g := l.queue[i]
		for k := range l.columns.pieces {
			l.column(&l.columns.pieces[k], int(g), func(row int, v float64) {
				l.entries = append(l.entries, triplet{int32(row), g, int32(k), v})
				if row < n2 && l.index[row] < 0 {
					l.index[row] = 0
					l.queue = append(l.queue, int32(row))
				}
			})
		}
	}
}

// place numbers the coordinates and lays the entries out by rows.
func (l *Layout) place(pieces, counters int) {
	n2 := l.levels * l.levels
	l.reach = len(l.queue)
	l.n = l.reach + counters
	l.global = append(l.global[:0], l.queue...)
	for i, g := range l.global {
		l.index[g] = i
	}
	for i := range l.entries {
		e := &l.entries[i]
		e.col = int32(l.index[e.col])
		if int(e.row) >= n2 {
			e.row += int32(l.reach - n2)
		} else {
			e.row = int32(l.index[e.row])
		}
	}
	if l.reach > smallest { // below, full matrices are as good
		l.reorder()
	}
	l.sort(l.n, false)
	l.sort(l.n, true)
	l.pops = l.pops[:0]
	for i, g := range l.global {
		if int(g) < l.levels {
			l.pops = append(l.pops, int32(i))
		}
	}

	l.start = zeroed(l.start, l.n+1)
	l.col = l.col[:0]
	l.atSlab, l.valSlab = sized(l.atSlab, len(l.entries)), sized(l.valSlab, len(l.entries))
	l.count = zeroed(l.count, pieces+1)
	for i := range l.entries {
		l.count[l.entries[i].piece+1]++
	}
	for k := 0; k < pieces; k++ {
		l.count[k+1] += l.count[k]
	}
	l.pieces = sized(l.pieces, pieces)
	for k := range l.pieces {
		l.pieces[k] = placed{l.atSlab[l.count[k]:l.count[k]:l.count[k+1]], l.valSlab[l.count[k]:l.count[k]:l.count[k+1]]}
	}
	for i := range l.entries {
		e := &l.entries[i]
		if i == 0 || e.row != l.entries[i-1].row || e.col != l.entries[i-1].col {
			l.col = append(l.col, e.col)
			l.start[e.row+1]++
		}
		p := &l.pieces[e.piece]
		p.at = append(p.at, int32(len(l.col)-1))
		p.val = append(p.val, e.val)
	}
	for i := 0; i < l.n; i++ {
		l.start[i+1] += l.start[i]
	}
	for k := range l.rows {
		l.rows[k] = l.rows[k][:0]
	}
	for i := 0; i < l.n; i++ {
		k := min(int(l.start[i+1]-l.start[i]), longRow)
		l.rows[k] = append(l.rows[k], int32(i))
	}
	if l.n > smallest {
		l.close()
	}
}

// close finds the intervals that any propagator fits in: a row reaches from
// the first coordinate that feeds it, however indirectly, to the last one of
// its component.
func (l *Layout) close() {
	blocks := padded(l.n) / 4
	l.closure.lo, l.closure.hi = sized(l.closure.lo, blocks), sized(l.closure.hi, blocks)
	for b := range l.closure.lo {
		l.closure.lo[b], l.closure.hi[b] = int32(padded(l.n)), 0
	}
	o := &l.ordering
	component := func(i int) int32 { // counters are components of their own
		if i >= l.reach || l.reach <= smallest {
			return int32(-1 - i)
		}
		return o.component[o.order[i]]
	}
	lows := make([]int32, l.n)
	for i := 0; i < l.n; {
		j, low := i, int32(i)
		for ; j < l.n && component(j) == component(i); j++ {
			for _, c := range l.col[l.start[j]:l.start[j+1]] {
				if int(c) < i {
					low = min(low, lows[c])
				}
			}
		}
		high := int32(j)
		if l.reach <= smallest { // not ordered
			low, high = 0, int32(l.n)
		}
		for ; i < j; i++ {
			lows[i] = low
			b := i / 4
			l.closure.lo[b] = min(l.closure.lo[b], low&^3)
			l.closure.hi[b] = max(l.closure.hi[b], (high+3)&^3)
		}
	}
}

// reorder numbers the coordinates anew. The search has left the entries sorted
// by column.
func (l *Layout) reorder() {
	order := l.ordering.find(l.reach, l.entries)
	place := l.ordering.edge
	for i, old := range order {
		l.global[i] = l.queue[old]
		place[old] = int32(i)
	}
	for i, g := range l.global {
		l.index[g] = i
	}
	for i := range l.entries {
		e := &l.entries[i]
		e.col = place[e.col]
		if int(e.row) < l.reach {
			e.row = place[e.row]
		}
	}
}

// sort sorts the entries by rows or by columns, all below n, keeping the order
// of equals.
func (l *Layout) sort(n int, rows bool) {
	l.count = zeroed(l.count, n+1)
	l.sorted = sized(l.sorted, len(l.entries))
	for i := range l.entries {
		k := l.entries[i].col
		if rows {
			k = l.entries[i].row
		}
		l.count[k+1]++
	}
	for i := 0; i < n; i++ {
		l.count[i+1] += l.count[i]
	}
	for i := range l.entries {
		k := l.entries[i].col
		if rows {
			k = l.entries[i].row
		}
		l.sorted[l.count[k]] = l.entries[i]
		l.count[k]++
	}
	l.entries, l.sorted = l.sorted, l.entries
}

// generator writes Σ coef_k L_k on the pattern into vals.
func (l *Layout) generator(vals, coef []float64) {
	clear(vals)
	for k, c := range coef {
		if c != 0 {
			p := &l.pieces[k]
			for i, at := range p.at {
				vals[at] += c * p.val[i]
			}
		}
	}
}
