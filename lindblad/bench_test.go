package lindblad

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// BenchmarkReference solves each reference problem anew in every iteration,
// laying out the generator included, and hands out every coordinate at every
// output. Memory of workspaces is reused, no number is. maxerr is the largest
// error of a population over all reference outputs.
func BenchmarkReference(b *testing.B) {
	for _, p := range readProblems(b) {
		b.Run(p.Name, func(b *testing.B) {
			var worst float64
			var l Layout
			var v Solver
			var x []float64
			seen, next := 0, 0
			emit := func(i int, x []float64, _ [][]float64) error {
				seen++
				if i == next {
					next += p.ReferenceEvery
					for a, want := range p.Reference[i/p.ReferenceEvery] {
						worst = math.Max(worst, math.Abs(l.Population(x, a)-want))
					}
				}
				return nil
			}
			s := p.setup()
			b.ReportAllocs()
			for b.Loop() {
				seen, next = 0, 0
				require.NoError(b, l.Set(s.levels, s.pieces, s.support, 0))
				x = sized(x, l.Len())
				l.SetState(x, s.rho)
				v.Use(&l, nil, Settings{})
				require.NoError(b, v.Run(context.Background(), x, nil, s.stretch[:], s.order, s.rec, emit))
			}
			require.Equal(b, p.Outputs+1, seen)
			require.Less(b, worst, 1e-8)
			b.ReportMetric(worst, "maxerr")
		})
	}
}
