package lindblad

import (
	"context"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Fan gives what a run for each duration gives, states and slopes, shared or
// not.
func TestFanAgainstRuns(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 9))
	for trial := range 8 {
		b := newLaboratory(r, 2+trial%3, 2, trial%4 == 3)
		theta := []float64{0.01, -0.02}
		stretches := b.stretches(theta, true)
		order := []Node{{Stretch: 0}, {Group: []Node{{Stretch: 3}, {Stretch: 0}}, Repeat: 3}, {Stretch: 2}, {Stretch: 3}, {Stretch: 0}}
		if trial%2 == 1 {
			order = order[:3]
		}
		if trial%4 == 3 {
			order = append(order, Node{Stretch: 1}) // shaped: nothing is shared
		}
		l, err := NewLayout(b.levels, b.pieces, nil, b.counters)
		require.NoError(t, err)
		x0 := make([]float64, l.Len())
		l.SetState(x0, b.start)
		dx0 := make([][]float64, 2)
		for j := range dx0 {
			dx0[j] = make([]float64, l.Len())
			l.SetState(dx0[j], b.slope[j])
		}
		durations := []float64{0, 0.1, 0.2, 0.3, 0.4, 0.4, 0.75, 2}
		v := NewSolver(l, nil, Settings{Accuracy: 1e-12})
		count := 0
		err = v.Fan(context.Background(), x0, dx0, stretches, order, 2, durations, func(k int, x []float64, dx [][]float64) error {
			count++
			own := append([]Stretch(nil), stretches...)
			own[2].Lasts = durations[k]
			return NewSolver(l, nil, Settings{Accuracy: 1e-12}).Run(context.Background(), x0, dx0, own, order, Record{During: -1}, func(_ int, y []float64, dy [][]float64) error {
				for i := range y {
					assert.InDelta(t, y[i], x[i], 1e-11, "trial %d duration %d", trial, k)
					for j := range dy {
						assert.InDelta(t, dy[j][i], dx[j][i], 1e-9, "trial %d duration %d slope %d", trial, k, j)
					}
				}
				return nil
			})
		})
		require.NoError(t, err)
		assert.Equal(t, len(durations), count)
	}
}

func BenchmarkFan(b *testing.B) {
	h := Operator{{Row: 1, Col: 0, Value: 1}, {Row: 0, Col: 1, Value: 1}}
	pieces := []Piece{Hamiltonian(h), Hamiltonian(Operator{{Row: 1, Col: 1, Value: 1}}), Jump(Operator{{Row: 0, Col: 1, Value: 1}})}
	l, err := NewLayout(2, pieces, NewSupport(2, []complex128{1, 0, 0, 0}), 0)
	require.NoError(b, err)
	x0 := make([]float64, l.Len())
	l.SetState(x0, []complex128{1, 0, 0, 0})
	stretches := []Stretch{{Lasts: 0.8, Coef: []float64{1, 0.1, 0.01}}, {Coef: []float64{0, 0.1, 0.01}}}
	order := []Node{{Stretch: 0}, {Stretch: 1}, {Stretch: 0}}
	durations := make([]float64, 201)
	for k := range durations {
		durations[k] = float64(k) * 0.05
	}
	v := NewSolver(l, NewMemory(0), Settings{})
	for b.Loop() {
		err := v.Fan(context.Background(), x0, nil, stretches, order, 1, durations, func(int, []float64, [][]float64) error { return nil })
		require.NoError(b, err)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(durations)), "ns/output")
}
