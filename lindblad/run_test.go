package lindblad

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// laboratory is a random system with a random sequence that depends on a few
// parameters in every way that a sequence can.
type laboratory struct {
	levels   int
	counters int
	pieces   []Piece
	rates    []bool // pieces whose coefficient must not be negative
	start    dense
	slope    []dense // ∂ρ(0)/∂θ_j
	coef     [][]float64
	dcoef    [][][]float64 // stretch, direction, piece
	lasts    []float64
	dlasts   [][]float64
	ideal    []bool
	shaped   []bool
	rotor    []float64
	drotor   []float64
	order    []Node
}

func newLaboratory(r *rand.Rand, levels, directions int, shaped bool) *laboratory {
	b := &laboratory{levels: levels, counters: 1}
	add := func(p Piece, rate bool) {
		b.pieces = append(b.pieces, p)
		b.rates = append(b.rates, rate)
	}
	add(Hamiltonian(randomHermitian(r, levels, 2)), false)
	add(Hamiltonian(randomHermitian(r, levels, 2)), false)
	add(Jump(Operator{{0, levels - 1, 0.5}}), true)
	add(Jumps(randomOperator(r, levels, 2), randomOperator(r, levels, 1)), true)
	add(Damping(0, 1), true)
	add(Count(Operator{{levels - 1, levels - 1, 1}}, 0), false)
	b.start = randomState(r, levels, false)
	for range directions {
		d := randomState(r, levels, false).plus(randomState(r, levels, false), -1)
		b.slope = append(b.slope, d)
		b.drotor = append(b.drotor, 0.3*r.NormFloat64())
	}
	b.rotor = []float64{3 * r.Float64()}
	for i := range 4 {
		c := make([]float64, len(b.pieces))
		for k := range c {
			c[k] = r.NormFloat64()
			if b.rates[k] {
				c[k] = 0.3 * r.Float64()
			}
		}
		b.coef = append(b.coef, c)
		b.lasts = append(b.lasts, 0.3+r.Float64())
		b.ideal = append(b.ideal, i == 3)
		b.shaped = append(b.shaped, shaped && i == 1)
		var ds [][]float64
		var dl []float64
		for range directions {
			d := make([]float64, len(b.pieces))
			for k := range d {
				d[k] = r.NormFloat64()
				if b.rates[k] {
					d[k] *= 0.1
				}
			}
			ds = append(ds, d)
			dl = append(dl, 0.2*r.NormFloat64())
		}
		b.dcoef, b.dlasts = append(b.dcoef, ds), append(b.dlasts, dl)
	}
	b.order = []Node{
		{Stretch: 0},
		{Group: []Node{{Stretch: 1}, {Stretch: 3}, {Group: []Node{{Stretch: 2}, {Stretch: 0}}, Repeat: 2}}, Repeat: 3},
		{Group: []Node{{Stretch: 2}}, Repeat: 0},
		{Stretch: 2},
		{Stretch: 3},
	}
	return b
}

// stretches are those at the parameters theta.
func (b *laboratory) stretches(theta []float64, slopes bool) []Stretch {
	var out []Stretch
	for i := range b.coef {
		st := Stretch{Lasts: b.lasts[i], Ideal: b.ideal[i], Coef: append([]float64(nil), b.coef[i]...), Rotors: append([]float64(nil), b.rotor...)}
		for j, v := range theta {
			st.Lasts += v * b.dlasts[i][j]
			st.Rotors[0] += v * b.drotor[j]
			for k := range st.Coef {
				st.Coef[k] += v * b.dcoef[i][j][k]
			}
		}
		sum := 0.0
		for _, v := range theta {
			sum += v
		}
		if b.shaped[i] {
			st.Terms = []Term{
				{Piece: 0, Amplitude: 1 + sum, Phase: 0.3 - sum, Envelope: bell{1, 0.4 + 0.1*sum, 0.3}, Rotor: 0},
				{Piece: 1, Amplitude: 0.7, Phase: 0.1, Rotor: 0},
				{Piece: 0, Amplitude: 0.5, Envelope: bell{1, 0.2, 0.5}, Rotor: -1},
			}
		}
		if slopes {
			for j := range theta {
				s := Slope{Lasts: b.dlasts[i][j], Coef: b.dcoef[i][j], Rotors: []float64{b.drotor[j]}}
				if b.ideal[i] {
					s.Lasts = 0
				}
				if b.shaped[i] {
					s.Terms = []TermSlope{{Amplitude: 1, Phase: -1, Envelope: bellByCentre{bell{1, 0.4 + 0.1*sum, 0.3}, 0.1}}, {}, {}}
				}
				st.Slopes = append(st.Slopes, s)
			}
		}
		out = append(out, st)
	}
	return out
}

// bellByCentre is the derivative of a bell by its centre, times f.
type bellByCentre struct {
	bell
	f float64
}

func (b bellByCentre) At(t float64) float64 {
	return b.f * (t - b.centre) / (b.sigma * b.sigma) * b.bell.At(t)
}

func (b bellByCentre) Taylor(t float64, c []float64) {
	b.bell.Taylor(t, c)
	f, u := b.f/(b.sigma*b.sigma), t-b.centre
	for k := len(c) - 1; k >= 0; k-- {
		c[k] *= f * u
		if k > 0 {
			c[k] += f * c[k-1]
		}
	}
}

func (b *laboratory) run(t *testing.T, theta []float64, slopes bool, rec Record, s Settings) (x [][]float64, dx [][][]float64) {
	l, err := NewLayout(b.levels, b.pieces, nil, b.counters)
	require.NoError(t, err)
	rho := b.start
	for j, v := range theta {
		rho = rho.plus(b.slope[j], complex(v, 0))
	}
	x0 := make([]float64, l.Len())
	l.SetState(x0, rho)
	var dx0 [][]float64
	for j := range theta {
		d := make([]float64, l.Len())
		l.SetState(d, b.slope[j])
		dx0 = append(dx0, d)
	}
	if !slopes {
		dx0 = nil
	}
	v := NewSolver(l, nil, s)
	err = v.Run(context.Background(), x0, dx0, b.stretches(theta, slopes), b.order, rec, func(i int, y []float64, dy [][]float64) error {
		require.Equal(t, len(x), i)
		x = append(x, append([]float64(nil), y...))
		var all [][]float64
		for _, d := range dy {
			all = append(all, append([]float64(nil), d...))
		}
		dx = append(dx, all)
		return nil
	})
	require.NoError(t, err)
	return x, dx
}

// flatten plays the order into a list of stretches.
func flatten(order []Node) (out []int) {
	for _, n := range order {
		if n.Group == nil {
			out = append(out, n.Stretch)
		}
		for range n.Repeat {
			out = append(out, flatten(n.Group)...)
		}
	}
	return out
}

// Sequences of constant stretches against gonum's exponential of the full
// matrix, cut at the sample times by hand.
func TestSequencesAgainstMatrixExponentials(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 1))
	for trial := range 30 {
		b := newLaboratory(r, 2+trial%4, 0, false)
		rec := Record{Samples: []int{0, 2, 7, 101}[trial%4], During: -1}
		if trial%5 == 4 {
			rec = Record{Samples: 5, During: 2}
		}
		got, _ := b.run(t, nil, false, rec, Settings{})
		l, err := NewLayout(b.levels, b.pieces, nil, b.counters)
		require.NoError(t, err)
		n := l.Len()
		exp := func(st Stretch, tau float64) *mat.Dense {
			vals := make([]float64, len(l.col))
			l.generator(vals, st.Coef)
			a := mat.NewDense(n, n, nil)
			for i := range n {
				for e := l.start[i]; e < l.start[i+1]; e++ {
					a.Set(i, int(l.col[e]), vals[e]*tau)
				}
			}
			var e mat.Dense
			e.Exp(a)
			return &e
		}
		stretches := b.stretches(nil, false)
		list := flatten(b.order)
		from, to := 0.0, 0.0
		first, last := 0, len(list)
		if rec.During >= 0 {
			for list[first] != rec.During {
				first++
			}
			last = first + 1
		}
		for i, q := range list[:last] {
			if !stretches[q].Ideal {
				if i < first {
					from += stretches[q].Lasts
				}
				to += stretches[q].Lasts
			}
		}
		count := max(rec.Samples, 1)
		for k := range count {
			at := to
			if rec.Samples > 0 {
				at = from + (to-from)*float64(k)/float64(count-1)
			}
			x0 := make([]float64, n)
			l.SetState(x0, b.start)
			x := mat.NewVecDense(n, x0)
			now := 0.0
			for _, q := range list[:last] {
				st := stretches[q]
				tau := 1.0
				if !st.Ideal {
					tau = math.Min(st.Lasts, at-now)
					if tau < 1e-9 {
						break
					}
					now += tau
				}
				var y mat.VecDense
				y.MulVec(exp(st, tau), x)
				x.CopyVec(&y)
				if !st.Ideal && tau < st.Lasts-1e-9 {
					break
				}
			}
			for i := range n {
				assert.InDelta(t, x.AtVec(i), got[k][i], 1e-12, "trial %d sample %d coordinate %d", trial, k, i)
			}
		}
	}
}

// Tangents against sixth-order central differences of whole runs: error of the
// differences about h⁶·|x⁗⁗| + 1e-12/h = 1e-9; a larger h lets a sample cross
// the border of a stretch, where the slope jumps.
func TestTangentsAgainstDifferences(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 1))
	for trial := range 12 {
		b := newLaboratory(r, 2+trial%3, 2, trial%2 == 1)
		rec := Record{Samples: []int{0, 9}[trial/2%2], During: -1}
		if trial%6 == 5 {
			rec = Record{Samples: 5, During: 2}
		}
		s := Settings{Accuracy: 1e-12}
		theta := []float64{0.01, -0.02}
		x, dx := b.run(t, theta, true, rec, s)
		for j := range theta {
			diff := make([][]float64, len(x))
			for k := range diff {
				diff[k] = make([]float64, len(x[k]))
			}
			const h = 1e-3
			for m, w := range map[int]float64{1: 45. / 60, 2: -9. / 60, 3: 1. / 60} {
				for _, sign := range []float64{1, -1} {
					at := append([]float64(nil), theta...)
					at[j] += sign * float64(m) * h
					y, _ := b.run(t, at, false, rec, s)
					for k := range y {
						for i := range y[k] {
							diff[k][i] += sign * w * y[k][i] / h
						}
					}
				}
			}
			var size float64
			for k := range diff {
				for _, v := range diff[k] {
					size = math.Max(size, math.Abs(v))
				}
			}
			for k := range diff {
				for i := range diff[k] {
					assert.InDelta(t, diff[k][i], dx[k][j][i], 1e-7*size, fmt.Sprintf("trial %d sample %d direction %d coordinate %d", trial, k, j, i))
				}
			}
		}
	}
}
