package lindblad

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Dense complex matrices, written out, are the reference here.
type dense []complex128

func (a dense) times(b dense, n int) dense {
	c := make(dense, n*n)
	for i := range n {
		for j := range n {
			for k := range n {
				c[i*n+j] += a[i*n+k] * b[k*n+j]
			}
		}
	}
	return c
}

func (a dense) adjoint(n int) dense {
	c := make(dense, n*n)
	for i := range n {
		for j := range n {
			c[i*n+j] = complex(real(a[j*n+i]), -imag(a[j*n+i]))
		}
	}
	return c
}

func (a dense) plus(b dense, f complex128) dense {
	c := make(dense, len(a))
	for i := range a {
		c[i] = a[i] + f*b[i]
	}
	return c
}

func matrixOf(o Operator, n int) dense {
	c := make(dense, n*n)
	for _, e := range o {
		c[e.Row*n+e.Col] += e.Value
	}
	return c
}

// action is what a piece does to ρ, by matrix products.
func action(p Piece, rho dense, n int) dense {
	one := func(a, b dense) dense { // aρb† − ½{b†a, ρ}
		ba := b.adjoint(n).times(a, n)
		return a.times(rho, n).times(b.adjoint(n), n).plus(ba.times(rho, n), -0.5).plus(rho.times(ba, n), -0.5)
	}
	switch p.kind {
	case hamiltonian:
		h := matrixOf(p.op, n)
		return h.times(rho, n).plus(rho.times(h, n), -1).plus(make(dense, n*n), 0).times(scaledIdentity(n, -1i), n)
	case jump:
		return one(matrixOf(p.op, n), matrixOf(p.op, n))
	case jumps:
		out := make(dense, n*n)
		for _, o := range p.ops {
			out = out.plus(one(matrixOf(o, n), matrixOf(o, n)), 1)
		}
		return out
	case crossJump:
		a, b := matrixOf(p.op, n), matrixOf(p.other, n)
		return one(a, b).plus(one(b, a), 1)
	case damping:
		out := make(dense, n*n)
		out[p.a*n+p.b], out[p.b*n+p.a] = -rho[p.a*n+p.b], -rho[p.b*n+p.a]
		return out
	}
	return make(dense, n*n)
}

func scaledIdentity(n int, v complex128) dense {
	c := make(dense, n*n)
	for i := range n {
		c[i*n+i] = v
	}
	return c
}

func randomComplex(r *rand.Rand) complex128 { return complex(r.NormFloat64(), r.NormFloat64()) }

func randomOperator(r *rand.Rand, n, entries int) Operator {
	o := make(Operator, entries)
	for i := range o {
		o[i] = Entry{r.IntN(n), r.IntN(n), randomComplex(r)}
	}
	return o
}

func randomHermitian(r *rand.Rand, n, entries int) Operator {
	o := randomOperator(r, n, entries)
	for _, e := range o[:entries] {
		o = append(o, Entry{e.Col, e.Row, complex(real(e.Value), -imag(e.Value))})
	}
	return o
}

// randomState has full rank unless pure.
func randomState(r *rand.Rand, n int, pure bool) dense {
	a := make(dense, n*n)
	for i := range n {
		for j := range n {
			if !pure || j == 0 {
				a[i*n+j] = randomComplex(r)
			}
		}
	}
	rho := a.times(a.adjoint(n), n)
	var tr complex128
	for i := range n {
		tr += rho[i*n+i]
	}
	for i := range rho {
		rho[i] /= tr
	}
	return rho
}

func TestCoordinatesAreAnIsometry(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for n := 1; n <= 6; n++ {
		l, err := NewLayout(n, nil, nil, 0)
		require.NoError(t, err)
		require.Equal(t, n*n, l.Len())
		rho := randomState(r, n, false)
		x, back := make([]float64, l.Len()), make([]complex128, n*n)
		l.SetState(x, rho)
		l.State(x, back)
		var purity, length float64
		for i := range rho {
			assert.InDelta(t, 0, abs(rho[i]-back[i]), 1e-15)
			purity += real(rho[i])*real(rho[i]) + imag(rho[i])*imag(rho[i])
		}
		for _, v := range x {
			length += v * v
		}
		assert.InDelta(t, purity, length, 1e-14)
		for a := range n {
			for b := range n {
				assert.InDelta(t, 0, abs(rho[a*n+b]-l.Coherence(x, a, b)), 1e-15)
			}
		}
	}
}

func abs(z complex128) float64 { return math.Hypot(real(z), imag(z)) }

// Every kind of piece against products of dense complex matrices.
func TestPiecesAgainstMatrixProducts(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 1))
	for trial := 0; trial < 200; trial++ {
		n := 2 + trial%5
		pieces := []Piece{
			Hamiltonian(randomHermitian(r, n, 3)),
			Jump(randomOperator(r, n, 3)),
			Jumps(randomOperator(r, n, 2), randomOperator(r, n, 4)),
			CrossJump(randomOperator(r, n, 3), randomOperator(r, n, 2)),
			Damping(n-1, 0),
			{},
		}
		l, err := NewLayout(n, pieces, nil, 0)
		require.NoError(t, err)
		rho := randomState(r, n, false)
		x, y := make([]float64, l.Len()), make([]float64, l.Len())
		got := make([]complex128, n*n)
		l.SetState(x, rho)
		vals := make([]float64, len(l.col))
		for k, p := range pieces {
			coef := make([]float64, len(pieces))
			coef[k] = 1
			l.generator(vals, coef)
			l.times(y, vals, x)
			l.State(y, got)
			for i, want := range action(p, rho, n) {
				assert.InDelta(t, 0, abs(want-got[i]), 1e-13, "piece %d element %d", k, i)
			}
		}
	}
}

func TestCountersCollectExpectations(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	const n = 4
	a, b := randomHermitian(r, n, 5), randomHermitian(r, n, 2)
	l, err := NewLayout(n, []Piece{Count(a, 1), Count(b, 0)}, nil, 2)
	require.NoError(t, err)
	require.Equal(t, n*n+2, l.Len())
	rho := randomState(r, n, false)
	x, y := make([]float64, l.Len()), make([]float64, l.Len())
	l.SetState(x, rho)
	vals := make([]float64, len(l.col))
	l.generator(vals, []float64{2, 3})
	l.times(y, vals, x)
	trace := func(o Operator) float64 {
		p := matrixOf(o, n).times(rho, n)
		var s complex128
		for i := range n {
			s += p[i*n+i]
		}
		return real(s)
	}
	assert.InDelta(t, 2*trace(a), l.Counter(y, 1), 1e-13)
	assert.InDelta(t, 3*trace(b), l.Counter(y, 0), 1e-13)
}
