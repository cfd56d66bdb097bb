package lindblad

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
)

// Runge–Kutta steps against the methods that a run chooses by itself: states
// and slopes of whole sequences, with rotors, envelopes, samples and repeats.
func TestRungeKuttaAgainstTheOtherMethods(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 2))
	for trial := range 8 {
		b := newLaboratory(r, 2+trial%3, 2, trial%2 == 1)
		rec := Record{Samples: []int{0, 7}[trial/2%2], During: -1}
		if trial == 5 {
			rec = Record{Samples: 5, During: 2}
		}
		theta := []float64{0.01, -0.02}
		for _, accuracy := range []float64{1e-6, 1e-10} {
			x, dx := b.run(t, theta, true, rec, Settings{Accuracy: 1e-12})
			y, dy := b.run(t, theta, true, rec, Settings{Accuracy: accuracy, RungeKutta: true})
			for k := range x {
				for i := range x[k] {
					assert.InDelta(t, x[k][i], y[k][i], accuracy, "trial %d", trial)
				}
				for j := range dx[k] {
					size := math.Max(1, largest(dx[k][j]))
					for i := range dx[k][j] {
						// Tangents are held relative to their size over a stretch; the
						// norms of a tangent and of its sources differ by some ten.
						assert.InDelta(t, dx[k][j][i], dy[k][j][i], 30*accuracy*size, "trial %d slope %d", trial, j)
					}
				}
			}
		}
	}
}

// plainBell is a bell without a series.
type plainBell struct{ b bell }

func (p plainBell) At(t float64) float64 { return p.b.At(t) }

func TestEnvelopeWithoutSeries(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 3))
	b := newLaboratory(r, 3, 0, true)
	x, _ := b.run(t, nil, false, Record{Samples: 6, During: -1}, Settings{})
	st := b.stretches(nil, false)
	for i := range st {
		for k := range st[i].Terms {
			if e, ok := st[i].Terms[k].Envelope.(bell); ok {
				st[i].Terms[k].Envelope = plainBell{e}
			}
		}
	}
	assert.False(t, st[1].series())
	l, err := NewLayout(b.levels, b.pieces, nil, b.counters)
	assert.NoError(t, err)
	x0 := make([]float64, l.Len())
	l.SetState(x0, b.start)
	v := NewSolver(l, nil, Settings{})
	err = v.Run(t.Context(), x0, nil, st, b.order, Record{Samples: 6, During: -1}, func(k int, y []float64, _ [][]float64) error {
		for i := range y {
			assert.InDelta(t, x[k][i], y[i], 2e-8) // two runs, each within 1e-8
		}
		return nil
	})
	assert.NoError(t, err)
	assert.Positive(t, v.Stats().Steps)
}
