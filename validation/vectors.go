package validation

import (
	"context"
	_ "embed"
	"encoding/json"
	"fmt"
	"math"
	"math/cmplx"
	"sort"

	"rhotrace/lindblad"
)

// vectorsFile holds density matrices computed with 90 digits; its key "about"
// says how.
//
//go:embed testdata/vectors.json
var vectorsFile []byte

type vectorProblem struct {
	Title  string  `json:"title"`
	H0     [][]any `json:"H0"`
	H1     [][]any `json:"H1"`
	Drive  *vectorDrive
	Decays []struct {
		Rate float64 `json:"rate"`
		L    [][]any `json:"L"`
	} `json:"jumps"`
	Rho0   [][]any `json:"rho0"`
	Times  []float64
	Rho    [][][]any `json:"rho"`
	Steady [][]any   `json:"steady"`
}

type vectorDrive struct {
	Kind                                   string
	Amplitude, Center, Sigma, Omega, Phase float64
}

func number(v any) complex128 {
	if pair, ok := v.([]any); ok {
		return complex(pair[0].(float64), pair[1].(float64))
	}
	return complex(v.(float64), 0)
}

func operator(m [][]any, scale float64) (o lindblad.Operator) {
	for r, row := range m {
		for c, v := range row {
			if z := number(v); z != 0 {
				o = append(o, lindblad.Entry{Row: r, Col: c, Value: z * complex(scale, 0)})
			}
		}
	}
	return o
}

func flat(m [][]any) (z []complex128) {
	for _, row := range m {
		for _, v := range row {
			z = append(z, number(v))
		}
	}
	return z
}

// bell is the Gaussian envelope exp(−(t − centre)²/2σ²).
type bell struct{ centre, sigma float64 }

func (b bell) At(t float64) float64 {
	u := (t - b.centre) / b.sigma
	return math.Exp(-u * u / 2)
}

// Taylor solves g' = −(t − centre)/σ² g.
func (b bell) Taylor(t float64, c []float64) {
	c[0] = b.At(t)
	f, u := -1/(b.sigma*b.sigma), t-b.centre
	for k := 0; k+1 < len(c); k++ {
		v := u * c[k]
		if k > 0 {
			v += c[k-1]
		}
		c[k+1] = f * v / float64(k+1)
	}
}

var _ lindblad.Series = bell{}

func vectorProblems() map[string]*vectorProblem {
	var file struct{ Problems map[string]*vectorProblem }
	if err := json.Unmarshal(vectorsFile, &file); err != nil {
		panic("validation: testdata/vectors.json: " + err.Error())
	}
	return file.Problems
}

func vectors() (list []Check) {
	problems := vectorProblems()
	var names []string
	for name := range problems {
		names = append(names, name)
	}
	sort.Strings(names)
	for _, name := range names {
		p := problems[name]
		list = append(list, Check{Name: "all of ρ, problem " + name, Source: vectorSource, Status: Recomputed,
			Expected: 0, Tolerance: 1e-11, Why: "an asked accuracy of 1e-11; largest error of any element at any of its times", Found: p.largestError})
		if p.Steady != nil {
			list = append(list, Check{Name: "steady state, problem " + name, Source: vectorSource, Status: Recomputed,
				Expected: 0, Tolerance: 1e-12, Why: direct + "; largest error of any element", Found: p.steadyError})
		}
	}
	return list
}

const vectorSource = "Taylor series with 90 digits"

// system lays the problem out for the engine.
func (p *vectorProblem) system(lasts float64) (*lindblad.Layout, []float64, lindblad.Stretch, error) {
	pieces := []lindblad.Piece{lindblad.Hamiltonian(operator(p.H0, 1))}
	coef := []float64{1}
	st := lindblad.Stretch{Lasts: lasts, Rotors: []float64{0}}
	if p.Drive != nil {
		pieces, coef = append(pieces, lindblad.Hamiltonian(operator(p.H1, 1))), append(coef, 0)
		term := lindblad.Term{Piece: 1, Amplitude: p.Drive.Amplitude, Rotor: -1}
		switch p.Drive.Kind {
		case "gaussian":
			term.Envelope = bell{p.Drive.Center, p.Drive.Sigma}
		case "cosine":
			term.Rotor, term.Phase = 0, p.Drive.Phase
			st.Rotors[0] = p.Drive.Omega
		default:
			return nil, nil, st, fmt.Errorf("unknown drive %q", p.Drive.Kind)
		}
		st.Terms = []lindblad.Term{term}
	}
	for _, d := range p.Decays {
		pieces, coef = append(pieces, lindblad.Jump(operator(d.L, math.Sqrt(d.Rate)))), append(coef, 1)
	}
	st.Coef = coef
	rho := flat(p.Rho0)
	l, err := lindblad.NewLayout(len(p.H0), pieces, lindblad.NewSupport(len(p.H0), rho), 0)
	if err != nil {
		return nil, nil, st, err
	}
	x := make([]float64, l.Len())
	l.SetState(x, rho)
	return l, x, st, nil
}

func (p *vectorProblem) largestError(ctx context.Context) (float64, error) {
	worst := 0.0
	for i, t := range p.Times {
		l, x, st, err := p.system(t)
		if err != nil {
			return 0, err
		}
		solver := lindblad.NewSolver(l, nil, lindblad.Settings{Accuracy: 1e-11})
		err = solver.Run(ctx, x, nil, []lindblad.Stretch{st}, []lindblad.Node{{Stretch: 0}}, lindblad.Record{During: -1},
			func(_ int, y []float64, _ [][]float64) error {
				worst = math.Max(worst, difference(l, y, flat(p.Rho[i])))
				return nil
			})
		if err != nil {
			return 0, err
		}
	}
	return worst, nil
}

func (p *vectorProblem) steadyError(ctx context.Context) (float64, error) {
	l, x, st, err := p.system(1)
	if err != nil {
		return 0, err
	}
	y, _, unique, err := lindblad.NewSolver(l, nil, lindblad.Settings{}).Steady(ctx, x, []lindblad.Stretch{st}, []lindblad.Node{{Stretch: 0}})
	if err == nil && !unique {
		err = fmt.Errorf("the steady state is not unique")
	}
	if err != nil {
		return 0, err
	}
	return difference(l, y, flat(p.Steady)), nil
}

// difference is the largest one between elements of two density matrices.
func difference(l *lindblad.Layout, y []float64, want []complex128) (worst float64) {
	have := make([]complex128, len(want))
	l.State(y, have)
	for k := range want {
		worst = math.Max(worst, cmplx.Abs(have[k]-want[k]))
	}
	return worst
}
