package validation

import (
	"context"
	"fmt"
	"math"

	"rhotrace/lindblad"
)

func shifts() (list []Check) {
	for _, c := range [][3]float64{{1, -20, -0.0124921972503937}, {1, 10, 0.0249378105604450}} {
		list = append(list, Check{Name: fmt.Sprintf("light shift of g, Ω=%g Δ=%g", c[0], c[1]), Source: "eigenvalue of two levels", Status: Recomputed,
			Expected: c[2], Tolerance: 1e-9, Why: "1e-8 on a coherence of 1/2, read as a phase after 30 units of time or more",
			Found: func(ctx context.Context) (float64, error) { return lightShift(ctx, c[0], c[1]) }})
	}
	for _, c := range [][2]float64{{0.05, 0.9993745112528712}, {0.1, 0.9974921575900666}, {0.2, 0.9898730613599063}, {0.3, 0.9768446240975698}} {
		list = append(list, Check{Name: fmt.Sprintf("Bloch–Siegert resonance, Ω=%gω", c[0]), Source: "Shirley, Phys. Rev. 138, B979 (1965)", Status: Recomputed,
			Expected: c[1], Tolerance: 1e-10, Why: "1e-12 on the state, with its slopes, over a curvature of 15 or more",
			Found: func(ctx context.Context) (float64, error) { return counterRotating(ctx, c[0]) }})
	}
	return list
}

// lightShift is the shift of g (rad/µs), from its phase against a level that the
// light leaves alone. After whole turns of the flop, here a hundred or more, g is
// back with e^{−iλt}, λ its eigenvalue.
func lightShift(ctx context.Context, omega, delta float64) (float64, error) {
	w := math.Hypot(omega, delta)
	turns := math.Ceil(30 * w / (2 * math.Pi))
	lasts := 2 * math.Pi * turns / w
	t, err := run(ctx, `[level.g]
[level.e]
[level.r]
[drive.d]
between = ["g", "e"]
rabi = "`+hz(omega)+`"
detuning = "`+hz(delta)+`"
[start]
populations = { g = 0.5, r = 0.5 }
phases = { g = "0 deg", r = "0 deg" }
`+pulse(lasts)+"[record]\ncoherences = [\"g:r\"]\n")
	if err != nil {
		return 0, err
	}
	re, err := lastOf(t, "coherence.g:r.re")
	if err != nil {
		return 0, err
	}
	im, err := lastOf(t, "coherence.g:r.im")
	return -math.Atan2(im, re) / lasts, err
}

// counterRotating is the resonant ω0 of H = ½ω0σz + Ω cos(t) σx: there the
// splitting 2q of the quasi-energies is stationary (the time average of P is
// ½(1 − 4(∂q/∂ω0)²)). |Tr U|² = 4 cos²(qT) of the map of one period shows q; its
// zero slope is found by secants.
func counterRotating(ctx context.Context, omega float64) (float64, error) {
	half := lindblad.Operator{{Row: 0, Col: 0, Value: -0.5}, {Row: 1, Col: 1, Value: 0.5}}
	turn := lindblad.Operator{{Row: 0, Col: 1, Value: 1}, {Row: 1, Col: 0, Value: 1}}
	l, err := lindblad.NewLayout(2, []lindblad.Piece{lindblad.Hamiltonian(half), lindblad.Hamiltonian(turn)}, nil, 0)
	if err != nil {
		return 0, err
	}
	solver := lindblad.NewSolver(l, nil, lindblad.Settings{Accuracy: 1e-12})
	inputs := [4][]complex128{{1, 0, 0, 0}, {0, 0, 0, 1}, {0.5, 0.5, 0.5, 0.5}, {0.5, -0.5i, 0.5i, 0.5}}
	slope := func(omega0 float64) (float64, error) {
		period := lindblad.Stretch{Lasts: 2 * math.Pi, Coef: []float64{omega0, 0}, Rotors: []float64{1},
			Terms:  []lindblad.Term{{Piece: 1, Amplitude: omega, Rotor: 0}},
			Slopes: []lindblad.Slope{{Coef: []float64{1, 0}, Terms: make([]lindblad.TermSlope, 1)}}}
		var bloch [4][3]float64 // slopes of the Bloch vectors that the inputs end with
		for i, rho := range inputs {
			x := make([]float64, l.Len())
			l.SetState(x, rho)
			err := solver.Run(ctx, x, nil, []lindblad.Stretch{period}, []lindblad.Node{{Stretch: 0}}, lindblad.Record{During: -1},
				func(_ int, _ []float64, dx [][]float64) error {
					z := l.Coherence(dx[0], 0, 1)
					bloch[i] = [3]float64{2 * real(z), -2 * imag(z), l.Population(dx[0], 0) - l.Population(dx[0], 1)}
					return nil
				})
			if err != nil {
				return 0, err
			}
		}
		sum := (bloch[0][2] - bloch[1][2]) / 2 // ½ Σ Tr(σ U σ U†), the maps of σ by linearity
		for i := range 2 {
			sum += bloch[2+i][i] - (bloch[0][i]+bloch[1][i])/2
		}
		return sum, nil
	}
	a, b := 1.0, 1-omega*omega/4
	fa, err := slope(a)
	if err != nil {
		return 0, err
	}
	for range 20 {
		fb, err := slope(b)
		if err != nil {
			return 0, err
		}
		if fb == fa || math.Abs(b-a) < 1e-13 {
			return b, nil
		}
		a, b, fa = b, b-fb*(b-a)/(fb-fa), fb
	}
	return 0, fmt.Errorf("the resonance was not found")
}
