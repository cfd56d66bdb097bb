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

// echo is a wait between two pulses on two levels.
func echo(t testing.TB) (*Layout, []float64, []Stretch, []Node) {
	h := Operator{{Row: 1, Col: 0, Value: 1}, {Row: 0, Col: 1, Value: 1}}
	pieces := []Piece{Hamiltonian(h), Hamiltonian(Operator{{Row: 1, Col: 1, Value: 1}}), Jump(Operator{{Row: 0, Col: 1, Value: 1}})}
	l, err := NewLayout(2, pieces, NewSupport(2, []complex128{1, 0, 0, 0}), 0)
	require.NoError(t, err)
	x0 := make([]float64, l.Len())
	l.SetState(x0, []complex128{1, 0, 0, 0})
	stretches := []Stretch{{Lasts: 0.8, Coef: []float64{1, 0.1, 0.01}}, {Coef: []float64{0, 0.1, 0.01}}}
	return l, x0, stretches, []Node{{Stretch: 0}, {Stretch: 1}, {Stretch: 0}}
}

func equalSteps(n int, step float64) []float64 {
	d := make([]float64, n)
	for k := range d {
		d[k] = float64(k) * step
	}
	return d
}

// A stretch that takes no time is played the same for all durations.
func TestFanOverRotation(t *testing.T) {
	l, x0, stretches, order := echo(t)
	stretches[1].Ideal = true
	var want []float64
	v := NewSolver(l, nil, Settings{})
	require.NoError(t, v.Run(t.Context(), x0, nil, stretches, order, Record{During: -1}, func(_ int, x []float64, _ [][]float64) error {
		want = append(want, x...)
		return nil
	}))
	require.NoError(t, v.Fan(t.Context(), x0, nil, stretches, order, 1, []float64{0, 1, 2}, func(_ int, x []float64, _ [][]float64) error {
		assert.Equal(t, want, x)
		return nil
	}))
}

// An output allocates nothing: ten times as many cost no more.
func TestFanAllocates(t *testing.T) {
	l, x0, stretches, order := echo(t)
	v := NewSolver(l, NewMemory(0), Settings{})
	count := func(durations []float64) float64 {
		return testing.AllocsPerRun(10, func() {
			err := v.Fan(t.Context(), x0, nil, stretches, order, 1, durations, func(int, []float64, [][]float64) error { return nil })
			require.NoError(t, err)
		})
	}
	assert.Equal(t, count(equalSteps(20, 0.05)), count(equalSteps(200, 0.05)))
}

func BenchmarkFan(b *testing.B) {
	l, x0, stretches, order := echo(b)
	durations := equalSteps(201, 0.05)
	v := NewSolver(l, NewMemory(0), Settings{})
	for b.Loop() {
		err := v.Fan(context.Background(), x0, nil, stretches, order, 1, durations, func(int, []float64, [][]float64) error { return nil })
		require.NoError(b, err)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(durations)), "ns/output")
}
