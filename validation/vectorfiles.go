package validation

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
)

// vectorFiles are the problems of testdata/vectors.json that an experiment file
// can state, with one unit of time = 1 µs.
func vectorFiles() (list []Check) {
	problems := vectorProblems()
	angle := func(y, x float64) string { return fmt.Sprintf("%.17g deg", -math.Atan2(y, x)*180/math.Pi) }
	drive := func(name, lower, upper string, omega, delta float64, more string) string {
		return fmt.Sprintf("[drive.%s]\nbetween = [%q, %q]\nrabi = %q\ndetuning = %q\n%s", name, lower, upper, hz(omega), hz(delta), more)
	}
	decay := func(from, to string, rate float64) string {
		return fmt.Sprintf("[decay.%s-%s]\nfrom = %q\nto = %q\nrate = %q\n", from, to, from, to, perUs(rate))
	}
	const dephasing = "[dephasing.y]\nweights = { %s }\nrate = %q\n"
	texts := []struct{ problem, levels, steps, text string }{
		{"a", "ge", "on = [\"x\"]\n",
			drive("x", "g", "e", 2.5, 1.25, "phase = \""+angle(0.75, 1)+"\"\n") + decay("e", "g", 1) + fmt.Sprintf(dephasing, "e = 1", perUs(0.375))},
		{"b", "abc", "on = [\"x\", \"y\"]\n", // jumps √r Σ w|a⟩⟨a| damp ρ_ab at r(w_a − w_b)²/2
			drive("x", "a", "c", 1.5, 0.5, "") + drive("y", "b", "c", 0.875, 0.375, "") + decay("c", "a", 0.625) + decay("c", "b", 0.375) +
				fmt.Sprintf("[dephasing.z]\nweights = { a = 1, b = -1 }\nrate = %q\n", perUs(0.03125/2))},
		{"c", "abcd", "on = [\"w\", \"x\", \"y\", \"z\"]\n", // detunings that leave the loop at rest
			drive("w", "a", "b", 1, 0.5, "") + drive("x", "a", "c", 1.25, -0.25, "") + drive("y", "b", "d", 0.75, -0.125, "") +
				drive("z", "c", "d", 2.5, 0.625, "phase = \""+angle(1, 0.75)+"\"\n") +
				decay("b", "a", 1) + decay("c", "a", 0.75) + decay("d", "b", 0.5) + decay("d", "c", 0.25)},
		{"d", "ge", "on = [\"x\"]\nshape = \"gaussian\"\ncentre = \"4 us\"\nwidth = \"1 us\"\n",
			drive("x", "g", "e", 2.5, 0.75, "") + decay("e", "g", 0.25) + fmt.Sprintf(dephasing, "e = 1", perUs(0.0625))},
	}
	for _, v := range texts {
		p := problems[v.problem]
		levels := ""
		for _, l := range v.levels {
			levels += fmt.Sprintf("[level.%c]\n", l)
		}
		for i, t := range p.Times {
			text := levels + v.text + "[step.p]\n" + v.steps + "lasts = \"" + us(t) + "\"\n[sequence]\norder = \"p\"\n[record]\ncoherences = \"all\"\n"
			rho := flat(p.Rho[i])
			add := func(name, column string, expected float64) {
				list = append(list, Check{Name: fmt.Sprintf("problem %s at %g, %s", v.problem, t, name), Source: vectorSource, Status: Recomputed,
					Expected: expected, Tolerance: 2e-8, Why: asked + "; the start's parts have weights that sum to 1.5 at most",
					Found: started(flat(p.Rho0), v.levels, text, column)})
			}
			for k, l := range v.levels {
				add(fmt.Sprintf("ρ%c%c", l, l), fmt.Sprintf("population.%c", l), real(rho[k*(len(v.levels)+1)]))
			}
			pair := fmt.Sprintf("coherence.%c:%c", v.levels[0], v.levels[1])
			add("Re ρ"+v.levels[:2], pair+".re", real(rho[1]))
			add("Im ρ"+v.levels[:2], pair+".im", imag(rho[1]))
		}
	}
	return list
}

// started finds a column for any start state ρ. A file states single levels and
// equal superpositions of two; ρ is a sum of those with (also negative) weights
// 2|ρ_ab| and ρ_aa − Σ|ρ_ab|, and the equation is linear.
func started(rho []complex128, levels, text, column string) func(context.Context) (float64, error) {
	n := len(levels)
	total := func(context.Context) (float64, error) { return 0, nil }
	for a := range n {
		own := real(rho[a*n+a])
		for b := range n {
			r, phase := cmplx.Polar(rho[a*n+b])
			if a == b || r == 0 {
				continue
			}
			own -= r
			if a < b { // ρ_ab = r e^{i(φ_a − φ_b)}
				start := fmt.Sprintf("[start]\npopulations = { %[1]c = 0.5, %[2]c = 0.5 }\nphases = { %[1]c = \"%.17[3]g rad\", %[2]c = \"0 rad\" }\n", levels[a], levels[b], phase)
				total = sum(total, times(2*r, last(text+start, column)))
			}
		}
		if own != 0 {
			total = sum(total, times(own, last(text+fmt.Sprintf("[start]\npopulations = { %c = 1 }\n", levels[a]), column)))
		}
	}
	return total
}
