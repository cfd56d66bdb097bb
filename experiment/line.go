package experiment

import (
	"context"
	"sort"

	"rhotrace/lindblad"
)

// A line is a run of neighbouring points that differ in the duration of one
// step only. They share the work: see lindblad's Fan.

// lineLength is how many points a line has at most. It is fixed, so that the
// answer does not depend on the number of workers.
const lineLength = 128

// lineStep finds the step whose duration a dial sets and nothing else does;
// −1 when points along the dial cannot be run together.
func (e *Experiment) lineStep(f field) int {
	s := e.shape
	if s.record.samples > 0 || s.record.steady {
		return -1
	}
	for _, src := range s.order {
		for _, t := range src.targets {
			if t.dial == f {
				return -1
			}
		}
	}
	for i, st := range s.steps {
		if st.lasts == f && st.area == none && !st.course.given && !st.moves() {
			return i
		}
	}
	return -1
}

// moves reports whether something in the step follows its duration.
func (s *step) moves() bool {
	for i := range s.changes {
		if c := &s.changes[i].course; c.given || c.chirp != none {
			return true
		}
	}
	return s.course.chirp != none
}

// sorted reports whether the values of column k of rows a to b do not decrease,
// with all other columns equal.
func alongLine(rows [][]float64, k, a, b int) bool {
	for i := a + 1; i < b; i++ {
		for c := range rows[i] {
			if c != k && rows[i][c] != rows[a][c] {
				return false
			}
		}
	}
	return sort.SliceIsSorted(rows[a:b], func(i, j int) bool { return rows[a+i][k] < rows[a+j][k] })
}

// lines cuts points into runs [a, b) that can be run together along column k;
// runs of one point where they cannot.
func lines(rows [][]float64, k int) (cuts [][2]int) {
	for a := 0; a < len(rows); {
		b := a + 1
		for k >= 0 && b < len(rows) && b-a < lineLength && alongLine(rows[b-1:b+1], k, 0, 2) {
			b++
		}
		cuts = append(cuts, [2]int{a, b})
		a = b
	}
	return cuts
}

// runLine runs points that differ in the duration of one step; sample i of the
// answer belongs to durations[i].
func (v *evaluator) runLine(ctx context.Context, values []float64, step int, durations []float64) (*states, error) {
	v.lineStep, v.line = step, durations
	defer func() { v.line = nil }()
	return v.point(ctx, values, lindblad.Record{During: -1}, len(durations))
}
