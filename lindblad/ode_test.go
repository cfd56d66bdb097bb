package lindblad

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/ode"
)

// masterEquation is dρ/dt = −i[H, ρ] + Σ rate (cρc† − ½{c†c, ρ}) with full
// complex matrices, H = Σ f_k(t) H_k: the definition, without the package's
// coordinates, pieces or layout.
type masterEquation struct {
	n     int
	parts []dense
	f     []func(t float64) float64
	jumps []dense
	rates []float64
	h, g  dense // G = H − (i/2) Σ rate c†c, and products
	out   dense
}

func (m *masterEquation) times(out, a, b dense, conjugate bool) {
	n := m.n
	for i := range n {
		for j := range n {
			var sum complex128
			for k := range n {
				if conjugate { // a b†
					sum += a[i*n+k] * cmplx.Conj(b[j*n+k])
				} else {
					sum += a[i*n+k] * b[k*n+j]
				}
			}
			out[i*n+j] = sum
		}
	}
}

// slope takes ρ as real and imaginary parts in turn.
func (m *masterEquation) slope(t float64, y, dydt []float64) error {
	n := m.n
	rho := make(dense, n*n)
	for i := range rho {
		rho[i] = complex(y[2*i], y[2*i+1])
	}
	clear(m.h)
	clear(m.out)
	for k, p := range m.parts {
		f := complex(m.f[k](t), 0)
		for i, v := range p {
			m.h[i] += f * v
		}
	}
	for q, c := range m.jumps {
		rate := complex(m.rates[q], 0)
		for i := range n {
			for j := range n {
				for k := range n {
					m.h[i*n+j] -= 0.5i * rate * cmplx.Conj(c[k*n+i]) * c[k*n+j]
				}
			}
		}
		m.times(m.g, c, rho, false)
		gc := make(dense, n*n)
		m.times(gc, m.g, c, true)
		for i, v := range gc {
			m.out[i] += rate * v
		}
	}
	// −i(Gρ − ρG†). The second product is no adjoint of the first: where rounding
	// has left ρ not quite Hermitian, that would make the difference grow.
	rg := make(dense, n*n)
	m.times(m.g, m.h, rho, false)
	m.times(rg, rho, m.h, true)
	for i, v := range m.out {
		d := v - 1i*(m.g[i]-rg[i])
		dydt[2*i], dydt[2*i+1] = real(d), imag(d)
	}
	return nil
}

// Random driven systems, terms with rotors and with a Gaussian envelope, at all
// outputs: the solver against ode's method of order 8 on the definition of the
// equation, an independent method on independent arithmetic. It is asked for
// 1e-12 with PerTime, and the map contracts, so its own error is at most that.
func TestAgainstRungeKutta(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 1))
	for trial := range 20 {
		n := 2 + trial%4
		matrix := func(hermitian bool) (dense, Operator) {
			a, o := make(dense, n*n), Operator{}
			for i := range n {
				for j := range n {
					v := complex(r.NormFloat64(), r.NormFloat64())
					switch {
					case hermitian && i == j:
						v = complex(real(v), 0)
					case hermitian && i > j:
						v = cmplx.Conj(a[j*n+i])
					}
					a[i*n+j] = v
					o = append(o, Entry{i, j, v})
				}
			}
			return a, o
		}
		lasts := 1 + 3*r.Float64()
		m := masterEquation{n: n, h: make(dense, n*n), g: make(dense, n*n), out: make(dense, n*n)}
		var pieces []Piece
		st := Stretch{Lasts: lasts}
		for range 4 {
			a, o := matrix(true)
			m.parts = append(m.parts, a)
			pieces = append(pieces, Hamiltonian(o))
			st.Coef = append(st.Coef, 0)
		}
		for range 2 {
			c, o := matrix(false)
			rate := 0.3 * r.Float64()
			m.jumps, m.rates = append(m.jumps, c), append(m.rates, rate)
			pieces = append(pieces, Jump(o))
			st.Coef = append(st.Coef, rate)
		}
		st.Coef[0] = 1
		w, phase := 2+6*r.Float64(), 6*r.Float64()
		w2 := 9 * r.Float64()
		pulse := bell{1.5, lasts * r.Float64(), 0.1 + 0.4*r.Float64()}
		st.Rotors = []float64{w, w2}
		st.Terms = []Term{
			{Piece: 1, Amplitude: 0.8, Phase: phase, Rotor: 0},
			{Piece: 2, Amplitude: 1.1, Envelope: pulse, Rotor: -1},
			{Piece: 3, Amplitude: 0.7, Envelope: pulse, Rotor: 1},
		}
		shape := func(t float64) float64 {
			u := (t - pulse.centre) / pulse.sigma
			return 1.5 * math.Exp(-u*u/2)
		}
		m.f = []func(float64) float64{
			func(float64) float64 { return 1 },
			func(t float64) float64 { return 0.8 * math.Cos(w*t+phase) },
			func(t float64) float64 { return 1.1 * shape(t) },
			func(t float64) float64 { return 0.7 * shape(t) * math.Cos(w2*t) },
		}

		const samples = 7
		times := make([]float64, samples)
		for i := range times {
			times[i] = lasts * float64(i) / (samples - 1)
		}
		rho := make([]complex128, n*n)
		rho[0] = 1
		y := make([]float64, 2*n*n)
		y[0] = 1
		var want [samples]dense
		s := ode.NewSolver(len(y), ode.DormandPrince853, ode.Settings{Accuracy: 1e-12, PerTime: true})
		_, err := s.Solve(background, m.slope, 0, y, times, func(i int, _ float64, y []float64) error {
			for k := range rho {
				want[i] = append(want[i], complex(y[2*k], y[2*k+1]))
			}
			return nil
		})
		require.NoError(t, err)

		l, err := NewLayout(n, pieces, NewSupport(n, rho), 0)
		require.NoError(t, err)
		x := make([]float64, l.Len())
		l.SetState(x, rho)
		for _, accuracy := range []float64{1e-3, 1e-5, 1e-7, 1e-9, 1e-11, 1e-12} {
			seen := 0
			v := NewSolver(l, nil, Settings{Accuracy: accuracy})
			require.NoError(t, v.Run(background, x, nil, []Stretch{st}, []Node{{}}, Record{Samples: samples, During: -1}, func(i int, z []float64, _ [][]float64) error {
				got := make([]complex128, n*n)
				l.State(z, got)
				for k := range got {
					assert.LessOrEqual(t, cmplx.Abs(got[k]-want[i][k]), accuracy+1e-12, "trial %d, %d levels, accuracy %g, sample %d", trial, n, accuracy, i)
				}
				seen++
				return nil
			}))
			assert.Equal(t, samples, seen)
		}
	}
}
