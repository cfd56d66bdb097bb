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

// testdata/problems.json holds six problems with populations computed by a
// general-purpose solver of ordinary differential equations to better than
// 1e-10; it came with the project's brief.
type problem struct {
	Name        string
	Levels      int
	Hamiltonian [][4]float64
	Pieces      []struct {
		Envelope                                   string
		Amplitude, Centre, Sigma, Frequency, Phase float64
		Operator                                   [][4]float64
	}
	Jumps            [][][4]float64
	StartPopulations []float64 `json:"start_populations"`
	First, Last      float64
	Outputs          int
	ReferenceEvery   int `json:"reference_every"`
	Reference        [][]float64
}

func readProblems(t testing.TB) []problem {
	text, err := os.ReadFile("testdata/problems.json")
	require.NoError(t, err)
	var all struct{ Problems []problem }
	require.NoError(t, json.Unmarshal(text, &all))
	return all.Problems
}

func operator(rows [][4]float64) Operator {
	o := make(Operator, len(rows))
	for i, r := range rows {
		o[i] = Entry{int(r[0]), int(r[1]), complex(r[2], r[3])}
	}
	return o
}

// bell is amplitude exp(−((t − centre)/sigma)²/2), the tests' own shape.
type bell struct{ amplitude, centre, sigma float64 }

func (b bell) At(t float64) float64 {
	u := (t - b.centre) / b.sigma
	return b.amplitude * math.Exp(-u*u/2)
}

func (b bell) Taylor(t float64, c []float64) {
	c[0] = b.At(t)
	u, s := (t-b.centre)/b.sigma, 1/b.sigma
	for k := 0; k+1 < len(c); k++ {
		v := -u * s * c[k]
		if k > 0 {
			v -= s * s * c[k-1]
		}
		c[k+1] = v / float64(k+1)
	}
}

// setup is a problem in the terms of the package.
type setup struct {
	levels  int
	pieces  []Piece
	rho     []complex128
	support *Support
	stretch [1]Stretch
	order   []Node
	rec     Record
}

func (p *problem) setup() *setup {
	s := &setup{levels: p.Levels, order: []Node{{Stretch: 0}}, rec: Record{Samples: p.Outputs + 1, During: -1}}
	if p.First != 0 {
		panic("problem does not start at zero")
	}
	var st Stretch
	add := func(piece Piece, c float64) {
		s.pieces = append(s.pieces, piece)
		st.Coef = append(st.Coef, c)
	}
	add(Hamiltonian(operator(p.Hamiltonian)), 1)
	var ops []Operator
	for _, c := range p.Jumps {
		ops = append(ops, operator(c))
	}
	if len(ops) > 0 {
		add(Jumps(ops...), 1)
	}
	for _, q := range p.Pieces {
		add(Hamiltonian(operator(q.Operator)), 0)
		term := Term{Piece: len(s.pieces) - 1, Amplitude: q.Amplitude, Rotor: -1}
		if q.Envelope == "gaussian" {
			term.Envelope = bell{1, q.Centre, q.Sigma}
		} else {
			term.Rotor = len(st.Rotors)
			term.Phase = q.Phase
			st.Rotors = append(st.Rotors, q.Frequency)
		}
		st.Terms = append(st.Terms, term)
	}
	st.Lasts = p.Last
	s.stretch[0] = st
	s.rho = make([]complex128, p.Levels*p.Levels)
	for i, v := range p.StartPopulations {
		s.rho[i*p.Levels+i] = complex(v, 0)
	}
	s.support = NewSupport(p.Levels, s.rho)
	return s
}

func TestReferenceProblems(t *testing.T) {
	for _, p := range readProblems(t) {
		s := p.setup()
		l, err := NewLayout(s.levels, s.pieces, s.support, 0)
		require.NoError(t, err)
		x := make([]float64, l.Len())
		l.SetState(x, s.rho)
		v := NewSolver(l, nil, Settings{})
		var worst float64
		seen := 0
		err = v.Run(context.Background(), x, nil, s.stretch[:], s.order, s.rec, func(i int, x []float64, _ [][]float64) error {
			if i%p.ReferenceEvery == 0 && i/p.ReferenceEvery < len(p.Reference) {
				for a, want := range p.Reference[i/p.ReferenceEvery] {
					worst = math.Max(worst, math.Abs(l.Population(x, a)-want))
				}
			}
			seen++
			return nil
		})
		require.NoError(t, err)
		assert.Less(t, worst, 1e-8, p.Name)
		t.Logf("%s: %d coordinates, %d entries, error %.2g, %d outputs, %d references %+v", p.Name, l.Len(), len(l.col), worst, seen, len(p.Reference), v.Stats())
	}
}
