package lindblad

import (
	"context"
	"encoding/json"
	"math"
	"os"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// testdata/reference-vectors.json: density matrices of five problems computed
// with mpmath to 50 digits (two to three independent methods that agree to
// better than 1e-60), which came with the project's brief.
type vector struct {
	H0    [][]any
	H1    [][]any
	Drive *struct {
		Kind                                   string
		Amplitude, Center, Sigma, Omega, Phase float64
	}
	Jumps []struct {
		Rate float64
		L    [][]any
	}
	Rho0     [][]any
	Times    []float64
	Solution []struct {
		T   float64
		Rho [][][2]float64 `json:"rho_double"`
	}
	Steady *struct {
		Rho [][][2]float64 `json:"rho_double"`
	} `json:"steady_state"`
}

func number(v any) complex128 {
	if pair, ok := v.([]any); ok {
		return complex(pair[0].(float64), pair[1].(float64))
	}
	return complex(v.(float64), 0)
}

func operatorOf(rows [][]any, f float64) (o Operator) {
	for i, r := range rows {
		for j, v := range r {
			if c := number(v); c != 0 {
				o = append(o, Entry{i, j, c * complex(f, 0)})
			}
		}
	}
	return o
}

func TestHighPrecisionVectors(t *testing.T) {
	text, err := os.ReadFile("testdata/reference-vectors.json")
	require.NoError(t, err)
	var all struct{ Problems map[string]vector }
	require.NoError(t, json.Unmarshal(text, &all))
	require.Len(t, all.Problems, 6)
	for name, p := range all.Problems {
		for _, accuracy := range []float64{1e-4, 1e-6, 1e-8, 1e-10, 1e-12} {
			n := len(p.H0)
			pieces := []Piece{Hamiltonian(operatorOf(p.H0, 1))}
			coef := []float64{1}
			for _, c := range p.Jumps {
				pieces = append(pieces, Jump(operatorOf(c.L, math.Sqrt(c.Rate))))
				coef = append(coef, 1)
			}
			st := Stretch{Coef: coef}
			if d := p.Drive; d != nil {
				pieces = append(pieces, Hamiltonian(operatorOf(p.H1, 1)))
				st.Coef = append(st.Coef, 0)
				term := Term{Piece: len(pieces) - 1, Amplitude: d.Amplitude, Rotor: -1}
				if d.Kind == "gaussian" {
					term.Envelope = bell{1, d.Center, d.Sigma}
				} else {
					term.Rotor, term.Phase = 0, d.Phase
					st.Rotors = []float64{d.Omega}
				}
				st.Terms = []Term{term}
			}
			rho := make(dense, n*n)
			for i, r := range p.Rho0 {
				for j, v := range r {
					rho[i*n+j] = number(v)
				}
			}
			l, err := NewLayout(n, pieces, NewSupport(n, rho), 0)
			require.NoError(t, err)
			x := make([]float64, l.Len())
			l.SetState(x, rho)
			st.Lasts = p.Times[len(p.Times)-1]
			v := NewSolver(l, NewMemory(0), Settings{Accuracy: accuracy})
			var worst float64
			compare := func(x []float64, want [][][2]float64) {
				for a := range n {
					for b := range n {
						worst = math.Max(worst, abs(l.Coherence(x, a, b)-complex(want[a][b][0], want[a][b][1])))
					}
				}
			}
			err = v.Run(context.Background(), x, nil, []Stretch{st}, []Node{{}}, Record{During: -1, Times: p.Times}, func(i int, x []float64, _ [][]float64) error {
				compare(x, p.Solution[i].Rho)
				return nil
			})
			require.NoError(t, err)
			assert.LessOrEqual(t, worst, accuracy, name)
			t.Logf("%s: asked %.0e, error %.1e, %+v", name, accuracy, worst, v.Stats())
			if p.Steady != nil {
				worst = 0
				y, _, unique, err := v.Steady(context.Background(), x, []Stretch{st}, []Node{{}})
				require.NoError(t, err)
				assert.True(t, unique)
				compare(y, p.Steady.Rho)
				assert.Less(t, worst, 1e-14, "steady state of "+name)
			}
		}
	}
}
