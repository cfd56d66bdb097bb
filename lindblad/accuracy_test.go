package lindblad

import (
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"github.com/stretchr/testify/assert"
)

// What is asked bounds the true error. The truth is a run by Runge–Kutta steps
// at 1e-12, another method than those that are tested. With -v the test prints
// how much smaller than asked the errors are.
func TestAskedBoundsTheError(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 6))
	trials := 12
	if testing.Short() {
		trials = 4
	}
	shares := map[float64][]float64{}
	for trial := range trials {
		b := newLaboratory(r, 2+trial%4, 0, trial%3 != 0)
		for i := range b.coef {
			if b.levels > 2 {
				b.coef[i][4] = 0 // decay of one coherence alone is no physical process of three levels
			}
		}
		rec := Record{Samples: 9, During: -1}
		truth, _ := b.run(t, nil, false, rec, Settings{Accuracy: 1e-12, RungeKutta: true})
		for _, asked := range []float64{1e-4, 1e-6, 1e-8, 1e-10, 1e-11} {
			x, _ := b.run(t, nil, false, rec, Settings{Accuracy: asked})
			worst := 0.0
			for k := range x {
				for i := range x[k] {
					worst = math.Max(worst, math.Abs(x[k][i]-truth[k][i]))
				}
			}
			// The truth itself is known to 1e-12, in the sum over its steps.
			assert.LessOrEqual(t, worst, asked+3e-12, "trial %d asked %g", trial, asked)
			shares[asked] = append(shares[asked], asked/math.Max(worst, 1e-16))
		}
	}
	for asked, list := range shares {
		sort.Float64s(list)
		t.Logf("asked %g: asked/true %.3g at worst, %.3g median, %.3g at most", asked, list[0], list[len(list)/2], list[len(list)-1])
	}
}
