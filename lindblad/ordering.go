package lindblad

import "slices"

// ordering numbers coordinates so that propagators are block-triangular and
// narrow: strongly connected components (Tarjan, SIAM J. Comput. 1, 146, 1972)
// with sources first, and each component breadth first from a far end (as in
// Cuthill & McKee's scheme).
type ordering struct {
	n          int
	start, to  []int32 // edges: what each coordinate feeds
	back       []int32 // and the undirected graph
	backTo     []int32
	seen, low  []int32
	stack      []int32
	path       []int32
	edge       []int32
	component  []int32
	components int
	order      []int32
}

// find orders n coordinates; edges are (col → row) of the entries, which are
// sorted by column. Rows from n on (counters) are ignored.
func (o *ordering) find(n int, entries []triplet) []int32 {
	o.n = n
	o.start = zeroed(o.start, n+1)
	o.back = zeroed(o.back, n+1)
	o.to = o.to[:0]
	for i := range entries {
		e := &entries[i]
		if int(e.row) >= n || e.row == e.col {
			continue
		}
		o.start[e.col+1]++
		o.back[e.col+1]++
		o.back[e.row+1]++
		o.to = append(o.to, e.row)
	}
	for i := 0; i < n; i++ {
		o.start[i+1] += o.start[i]
		o.back[i+1] += o.back[i]
	}
	o.backTo = sized(o.backTo, int(o.back[n]))
	fill := append(o.edge[:0], o.back...)
	for c := int32(0); int(c) < n; c++ {
		for _, r := range o.to[o.start[c]:o.start[c+1]] {
			o.backTo[fill[c]], o.backTo[fill[r]] = r, c
			fill[c]++
			fill[r]++
		}
	}
	o.edge = fill
	o.connect()
	o.order = o.order[:0]
	o.seen = zeroed(o.seen, n)
	// Components were numbered sinks first.
	members := sized(o.low, n)
	counts := zeroed(o.path, o.components+1)
	for _, c := range o.component[:n] {
		counts[o.components-int(c)]++
	}
	for c := 0; c < o.components; c++ {
		counts[c+1] += counts[c]
	}
	at := append(o.stack[:0], counts...)
	for i := int32(0); int(i) < n; i++ {
		c := o.components - 1 - int(o.component[i])
		members[at[c]] = i
		at[c]++
	}
	for c := 0; c < o.components; c++ {
		o.arrange(members[counts[c]:counts[c+1]])
	}
	o.low, o.path, o.stack = members, counts, at
	return o.order
}

// connect finds the strongly connected components.
func (o *ordering) connect() {
	n := o.n
	o.seen, o.low, o.component = zeroed(o.seen, n), zeroed(o.low, n), zeroed(o.component, n)
	for i := range o.component {
		o.component[i] = -1
	}
	o.components = 0
	o.stack, o.path = o.stack[:0], o.path[:0]
	o.edge = sized(o.edge, n+1)
	var clock int32
	for first := int32(0); int(first) < n; first++ {
		if o.seen[first] != 0 {
			continue
		}
		o.path = append(o.path, first)
		for len(o.path) > 0 {
			v := o.path[len(o.path)-1]
			if o.seen[v] == 0 {
				clock++
				o.seen[v], o.low[v] = clock, clock
				o.stack = append(o.stack, v)
				o.edge[v] = o.start[v]
			}
			deeper := false
			for ; o.edge[v] < o.start[v+1]; o.edge[v]++ {
				w := o.to[o.edge[v]]
				if o.seen[w] == 0 {
					o.path = append(o.path, w)
					deeper = true
					break
				}
				if o.component[w] < 0 {
					o.low[v] = min(o.low[v], o.low[w])
				}
			}
			if deeper {
				continue
			}
			if o.low[v] == o.seen[v] {
				for {
					w := o.stack[len(o.stack)-1]
					o.stack = o.stack[:len(o.stack)-1]
					o.component[w] = int32(o.components)
					if w == v {
						break
					}
				}
				o.components++
			}
			o.path = o.path[:len(o.path)-1]
		}
	}
}

// arrange appends a component to the order, breadth first from the member
// that a first walk reaches last.
func (o *ordering) arrange(members []int32) {
	from := len(o.order)
	for _, m := range members {
		if o.seen[m] == -1 {
			continue
		}
		if len(o.order) > from && o.seen[m] != -1 {
			panic("lindblad: a strongly connected component falls apart")
		}
		o.walk(m, -2)
		last := o.order[len(o.order)-1]
		o.order = o.order[:from]
		o.walk(last, -1)
	}
}

// walk appends what can be reached from m in its component, marking it.
func (o *ordering) walk(m, mark int32) {
	from := len(o.order)
	o.order = append(o.order, m)
	o.seen[m] = mark
	c := o.component[m]
	for i := from; i < len(o.order); i++ {
		v := o.order[i]
		begin := len(o.order)
		for _, w := range o.backTo[o.back[v]:o.back[v+1]] {
			if o.component[w] == c && o.seen[w] != mark {
				o.seen[w] = mark
				o.order = append(o.order, w)
			}
		}
		slices.SortFunc(o.order[begin:], func(a, b int32) int {
			return int(o.back[a+1]-o.back[a]) - int(o.back[b+1]-o.back[b])
		})
	}
}
