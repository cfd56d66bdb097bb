package validation

import (
	"fmt"
	"math"
)

// damping are flops with pure dephasing beside the decay. The Bloch equations on
// resonance damp with a = (γ⊥ + Γ)/2 and turn with Ω'² = Ω² − ((γ⊥ − Γ)/2)²:
// ρee = ½ Ω²/(Ω² + Γγ⊥) [1 − e^{−at}(cos Ω't + (a/Ω') sin Ω't)]. At Ω' = 0 the
// bracket is 1 − e^{−at}(1 + at): the critical case.
func damping() (list []Check) {
	const source = "Torrey, Phys. Rev. 76, 1059 (1949)"
	for _, c := range [][2]float64{{0.25, 0.125}, {2, 0.75}} {
		phi, omega := c[0], c[1]
		for _, t := range []float64{1, 6} {
			across := 0.5 + phi
			a := (across + 1) / 2
			list = append(list, Check{Name: fmt.Sprintf("critical: γφ=%gΓ Ω=%gΓ Γt=%g", phi, omega, t), Source: source, Status: Recomputed,
				Expected: 0.5 * omega * omega / (omega*omega + across) * (1 - math.Exp(-a*t)*(1+a*t)), Tolerance: 1e-8, Why: asked,
				Found: last(twoLevels(omega, 0, 1, phi, pulse(t)), "population.e")})
		}
	}
	const weak, t = 0.05, 3.0 // with T1 = T2 every drive makes the atom swing
	list = append(list, Check{Name: "no overdamping at T1=T2, Ω=0.05Γ", Source: source, Status: Recomputed,
		Expected: 0.5 * weak * weak / (weak*weak + 1) * (1 - math.Exp(-t)*(math.Cos(weak*t)+math.Sin(weak*t)/weak)), Tolerance: 1e-8, Why: asked,
		Found: last(twoLevels(weak, 0, 1, 0.5, pulse(t)), "population.e")})
	for _, c := range [][2]float64{{0.2, 0.0342935528}, {1, 1.0 / 9}, {5, 0.00961168781}} {
		re, im := last(twoLevels(c[0], 0, 1, 0, endless), "coherence.g:e.re"), last(twoLevels(c[0], 0, 1, 0, endless), "coherence.g:e.im")
		list = append(list, Check{Name: fmt.Sprintf("coherently scattered, Ω=%gΓ", c[0]), Source: "Mollow, Phys. Rev. 188, 1969 (1969)", Status: Recomputed,
			Expected: c[1], Tolerance: 1e-10, Why: printed, Found: sum(square(re), square(im))})
	}
	return list
}
