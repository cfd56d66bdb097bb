package lindblad

import (
	"math"
	"sync"
)

// Memory remembers propagators across runs. It may be shared by the solvers of
// several goroutines and of several layouts. The key is every bit of the
// coefficients and the duration, so what is found has the same bits as what
// would be computed. The zero Memory remembers nothing; see NewMemory.
type Memory struct {
	mu       sync.Mutex
	limit    int // numbers per generation
	held     int
	new, old map[uint64][]*remembered // two generations: the older is dropped when the newer is full
}

type remembered struct {
	layout *Layout
	made   uint64 // the layout's making: Layout.Set makes it another
	key    []float64
	matrix full
	worst  float64
}

// NewMemory returns a memory of at most the given number of bytes (0: 64 MiB).
func NewMemory(bytes int) *Memory {
	if bytes <= 0 {
		bytes = 64 << 20
	}
	return &Memory{limit: bytes / 16, new: map[uint64][]*remembered{}, old: map[uint64][]*remembered{}}
}

func hash(key []float64) uint64 {
	h := uint64(14695981039346656037)
	for _, x := range key {
		h = (h ^ math.Float64bits(x)) * 0x9E3779B97F4A7C15
		h ^= h >> 29
	}
	return h
}

func find(list []*remembered, l *Layout, key []float64) *remembered {
next:
	for _, r := range list {
		if r.layout != l || r.made != l.made || len(r.key) != len(key) {
			continue
		}
		for i, x := range key {
			if math.Float64bits(x) != math.Float64bits(r.key[i]) {
				continue next
			}
		}
		return r
	}
	return nil
}

// get copies the remembered matrix into q.
func (m *Memory) get(l *Layout, key []float64, q *full, worst *float64) bool {
	if m == nil || m.limit == 0 {
		return false
	}
	h := hash(key)
	m.mu.Lock()
	r := find(m.new[h], l, key)
	if r == nil {
		if r = find(m.old[h], l, key); r != nil {
			m.add(h, r)
		}
	}
	m.mu.Unlock()
	if r == nil {
		return false
	}
	q.copyFrom(&r.matrix)
	*worst = r.worst
	return true
}

// put remembers a copy of q.
func (m *Memory) put(l *Layout, key []float64, q *full, worst float64) {
	if m == nil || m.limit == 0 || len(q.a)+len(key) > m.limit {
		return
	}
	h := hash(key)
	r := &remembered{layout: l, made: l.made, key: append([]float64(nil), key...), worst: worst}
	r.matrix.copyFrom(q)
	m.mu.Lock()
	defer m.mu.Unlock()
	if find(m.new[h], l, key) == nil {
		m.add(h, r)
	}
}

func (m *Memory) add(h uint64, r *remembered) {
	size := len(r.key) + len(r.matrix.a) + 32
	if m.held+size > m.limit {
		m.old, m.new, m.held = m.new, map[uint64][]*remembered{}, 0
	}
	m.held += size
	m.new[h] = append(m.new[h], r)
}
