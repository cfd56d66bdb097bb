package lindblad

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// lowestEigenvalue by gonum, of the real symmetric matrix (Re −Im; Im Re) that
// has each eigenvalue of the Hermitian one twice; shifted by one, since gonum
// fails on blocks of tiny elements.
func lowestEigenvalue(t *testing.T, rho []complex128, n int) float64 {
	m := mat.NewSymDense(2*n, nil)
	for i := range n {
		for j := range n {
			z := rho[i*n+j]
			m.SetSym(i, j, real(z))
			m.SetSym(n+i, n+j, real(z))
			if i == j {
				m.SetSym(i, i, real(z)+1)
				m.SetSym(n+i, n+i, real(z)+1)
			}
			m.SetSym(i, n+j, -imag(z))
		}
	}
	var e mat.EigenSym
	require.True(t, e.Factorize(m, false))
	return e.Values(nil)[0] - 1
}

// wild is a random Lindbladian of the kinds that hurt: near-pure starts, zero
// rates, degenerate levels, huge ratios of rates.
func wild(r *rand.Rand, shaped bool) (levels int, pieces []Piece, rho dense, st Stretch) {
	levels = 2 + r.IntN(5)
	add := func(p Piece, c float64) {
		pieces = append(pieces, p)
		st.Coef = append(st.Coef, c)
	}
	energy := make(Operator, levels)
	for i := range energy {
		e := 0.0
		if r.IntN(3) > 0 {
			e = r.NormFloat64() * math.Pow(10, 3*r.Float64())
		}
		energy[i] = Entry{i, i, complex(e, 0)}
	}
	add(Hamiltonian(energy), 1)
	add(Hamiltonian(randomHermitian(r, levels, levels)), math.Pow(10, 2*r.Float64()))
	for range r.IntN(4) {
		rate := math.Pow(10, 8*r.Float64()-5)
		if r.IntN(4) == 0 {
			rate = 0
		}
		add(Jump(randomOperator(r, levels, 1+r.IntN(3))), rate)
	}
	rho = randomState(r, levels, r.IntN(2) == 0)
	if r.IntN(3) == 0 {
		rho = make(dense, levels*levels)
		rho[0] = 1
	}
	st.Lasts = math.Pow(10, 2*r.Float64()-1)
	if shaped {
		st.Lasts = 0.1 + 2*r.Float64()
		st.Rotors = []float64{20 * r.NormFloat64()}
		st.Terms = []Term{{Piece: 1, Amplitude: 5 * r.NormFloat64(), Envelope: bell{1, st.Lasts / 2, st.Lasts / 5}, Rotor: r.IntN(2) - 1, Phase: r.Float64()}}
		if r.IntN(3) == 0 {
			st.Terms[0].Envelope, st.Terms[0].Rotor = nil, 0
			st.Lasts *= 10
		}
	}
	return
}

// No trace is lost and no output is negative, at any accuracy.
func TestOutputsAreDensityMatrices(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 1))
	for trial := range 1500 {
		levels, pieces, rho, st := wild(r, trial%3 == 2)
		l, err := NewLayout(levels, pieces, NewSupport(levels, rho), 0)
		require.NoError(t, err)
		x := make([]float64, l.Len())
		l.SetState(x, rho)
		v := NewSolver(l, nil, Settings{Accuracy: []float64{1e-2, 1e-4, 1e-8, 1e-12}[trial%4]})
		got := make([]complex128, levels*levels)
		check := func(_ int, x []float64, _ [][]float64) error {
			l.State(x, got)
			trace := 0.0
			for a := range levels {
				trace += real(got[a*levels+a])
				assert.GreaterOrEqual(t, real(got[a*levels+a]), -1e-12)
			}
			assert.InDelta(t, 1, trace, 5e-15, "trial %d", trial)
			assert.GreaterOrEqual(t, lowestEigenvalue(t, got, levels), -1e-12, "trial %d", trial)
			return nil
		}
		require.NoError(t, v.Run(context.Background(), x, nil, []Stretch{st}, []Node{{}}, Record{Samples: 13, During: -1}, check), "trial %d", trial)
		if t.Failed() {
			t.Fatalf("trial %d: %+v", trial, v.Stats())
		}
	}
}

// The nearest density matrix, against the definition: no convex combination
// with random density matrices is nearer (Smolin, Gambetta & Smith 2012).
func TestRepairGivesTheNearestState(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 1))
	for range 50 {
		n := 2 + r.IntN(4)
		l, err := NewLayout(n, nil, nil, 0)
		require.NoError(t, err)
		rho := randomState(r, n, true)
		for a := range n {
			rho[a*n+a] += complex(0.05*r.NormFloat64(), 0)
		}
		var tr complex128
		for a := range n {
			tr += rho[a*n+a]
		}
		rho[0] += 1 - tr
		x, y := make([]float64, l.Len()), make([]float64, l.Len())
		l.SetState(x, rho)
		copy(y, x)
		low := lowestEigenvalue(t, rho, n)
		if low > -1e-3 {
			continue
		}
		var w cone
		found, repaired := w.keep(l, y)
		require.True(t, repaired)
		assert.InDelta(t, low, found, 1e-13)
		got := make([]complex128, n*n)
		l.State(y, got)
		assert.GreaterOrEqual(t, lowestEigenvalue(t, got, n), -1e-13)
		assert.InDelta(t, 1, l.trace(y), 1e-14)
		distance := func(z []float64) (s float64) {
			for i, v := range z {
				s += (v - x[i]) * (v - x[i])
			}
			return s
		}
		z, other := make([]float64, l.Len()), make([]float64, l.Len())
		for range 200 {
			l.SetState(other, randomState(r, n, r.IntN(2) == 0))
			p := math.Pow(10, -4*r.Float64())
			for i := range z {
				z[i] = (1-p)*y[i] + p*other[i]
			}
			assert.GreaterOrEqual(t, distance(z), distance(y)-1e-14)
		}
	}
}
