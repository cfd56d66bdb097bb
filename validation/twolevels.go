package validation

import (
	"context"
	"fmt"
	"math"
)

func rabi() (list []Check) {
	for _, c := range [][4]float64{{1, 1, 2, 0.487840782031462}, {2, -3, 0.7, 0.279262887392484}} {
		list = append(list, Check{
			Name: fmt.Sprintf("Rabi flop, Ω=%g Δ=%g t=%g", c[0], c[1], c[2]), Source: "Rabi, Phys. Rev. 51, 652 (1937)", Status: Recomputed,
			Expected: c[3], Tolerance: 1e-8, Why: asked,
			Found: last(twoLevels(c[0], c[1], 0, 0, pulse(c[2])), "population.e"),
		})
	}
	for _, c := range [][3]float64{
		{0.1, 2, 3.98524607486688e-3}, {0.25, 0.5, 3.05429120346740e-3}, {0.25, 2, 2.45652555349403e-2}, {0.25, 10, 5.52943768252080e-2},
		{1, 0.5, 4.79695004492592e-2}, {1, 2, 0.306127967360833}, {1, 10, 0.333548000226546},
		{5, 0.5, 0.729065912696459}, {5, 2, 0.591472346204444}, {5, 10, 0.489952532755387},
	} {
		regime := "overdamped: "
		if c[0] == 0.25 {
			regime = "critical: "
		} else if c[0] > 0.25 {
			regime = "underdamped: "
		}
		list = append(list, Check{
			Name: fmt.Sprintf("%sΩ=%gΓ Γt=%g", regime, c[0], c[1]), Source: "Torrey, Phys. Rev. 76, 1059 (1949)", Status: Recomputed,
			Expected: c[2], Tolerance: 1e-8, Why: asked,
			Found: last(twoLevels(c[0], 0, 1, 0, pulse(c[1])), "population.e"),
		})
	}
	// After a photon the atom begins anew in the ground state.
	for _, c := range [][3]float64{{0.2, 1, 0.166704411199119}, {1, 1, 0.430831238822687}, {3, 1, 1.44897178879164}, {3, 2, 0.803863864599673}} {
		list = append(list, Check{
			Name: fmt.Sprintf("photon pairs g2, Ω=%gΓ Γτ=%g", c[0], c[1]), Source: "Carmichael, Walls, JPB 9, 1199 (1976)", Status: Recomputed,
			Expected: c[2], Tolerance: 6e-7, Why: "1e-8 on two populations over a steady population of 0.037 or more",
			Found: ratio(last(twoLevels(c[0], 0, 1, 0, pulse(c[1])), "population.e"), last(twoLevels(c[0], 0, 1, 0, endless), "population.e")),
		})
	}
	return list
}

func steady() []Check {
	const bloch = "F. Bloch, Phys. Rev. 70, 460 (1946)"
	const width = 3.43627705518632
	return []Check{
		{"steady state with dephasing", bloch, Recomputed, 0.307283359914939, 1e-10, direct, last(twoLevels(1.7, 0.9, 1, 0.3, endless), "population.e")},
		{"steady state", bloch, Recomputed, 0.288423153692615, 1e-10, direct, last(twoLevels(1.7, 0.9, 1, 0, endless), "population.e")},
		{"steady coherence, real part", bloch, Recomputed, 0.305389221556886, 1e-10, direct, last(twoLevels(1.7, 0.9, 1, 0, endless), "coherence.g:e.re")},
		{"steady coherence, imaginary part", bloch, Recomputed, 0.169660678642715, 1e-10, direct, last(twoLevels(1.7, 0.9, 1, 0, endless), "coherence.g:e.im")},
		{"power broadening: half height", bloch, Recomputed, 0.5, 1e-10, direct,
			ratio(last(twoLevels(1.7, width/2, 1, 0.3, endless), "population.e"), last(twoLevels(1.7, 0, 1, 0.3, endless), "population.e"))},
		{"scattering rate per lifetime", bloch, Recomputed, 0.288423153692615, 1e-10, direct,
			times(1e-6, last(twoLevels(1.7, 0.9, 1, 0, endless+"[readout]\nemission = [\"x\"]\n"), "signal"))},
		{"steady state after a long wait", bloch, Recomputed, 0.307283359914939, 1e-8, asked, last(twoLevels(1.7, 0.9, 1, 0.3, pulse(80)), "population.e")},
		{"coherence, laser 2 kHz wide", "Elliott et al., PRA 26, 12 (1982)", Memory,
			0.5 * math.Exp(-math.Pi*2e3*1e-4), 1e-8, asked,
			last("[level.g]\n[level.e]\n[drive.d]\nbetween = [\"g\", \"e\"]\nrabi = \"1 kHz\"\nlinewidth = \"2 kHz\"\n[start]\npopulations = { g = 0.5, e = 0.5 }\nphases = { g = \"0 deg\", e = \"0 deg\" }\n[step.w]\nlasts = \"100 us\"\n[sequence]\norder = \"w\"\n[record]\ncoherences = \"all\"\n", "coherence.g:e.re")},
	}
}

// fringe is a Ramsey sequence of two pulses of area π/2 with Ω = 1 rad/µs.
func fringe(delta, gap float64, order, more string) string {
	return twoLevels(1, delta, 0, 0, fill(`[step.h]
on = ["d"]
area = "0.5 pi"
[step.f]
on = ["d"]
area = "1 pi"
[step.k]
on = ["d"]
area = "0.5 pi"
lasts = "0 s"
[step.m]
on = ["d"]
area = "1 pi"
lasts = "0 s"
[step.m.d]
phase = "90 deg"
[step.w]
lasts = "GAP"
[sequence]
order = "ORDER"
`, "GAP", us(gap), "ORDER", order)+more)
}

func ramsey() (list []Check) {
	for _, c := range [][2]float64{{0.05, 0.726803189107251}, {0.3, 0.975152920366741}, {1, 1.24806345376764e-3}} {
		list = append(list, Check{
			Name: fmt.Sprintf("Ramsey, finite pulses, Δ=%g", c[0]), Source: "Ramsey, Phys. Rev. 78, 695 (1950)", Status: Recomputed,
			Expected: c[1], Tolerance: 1e-8, Why: asked, Found: last(fringe(c[0], 20, "h w h", ""), "population.e"),
		})
	}
	const sigma, gap = 0.08, 20.0
	spread := "[spread.s]\ndial = \"drive.d.detuning\"\nsigma = \"" + hz(sigma) + "\"\n"
	const linewidth = 0.02 // cycles per µs
	white := fill(fringe(0, gap, "ORDER", ""), "detuning =", fmt.Sprintf("linewidth = \"%g MHz\"\ndetuning =", linewidth))
	const small = 1e-4
	effective := func(ctx context.Context) (float64, error) { // 1 − P = (T_eff Δ)²/4 near the centre
		p, err := last(fringe(small, gap, "h w h", ""), "population.g")(ctx)
		return 2 * math.Sqrt(p) / small, err
	}
	return append(list,
		Check{"Ramsey effective time T + 4τ/π", "Ramsey, Phys. Rev. 78, 695 (1950)", Recomputed, gap + 2, 1e-5, "the next order is 22·(22Δ)²/24 = 4e-6 at Δ = 1e-4", effective},
		Check{"white noise, Ramsey", "Elliott et al., PRA 26, 12 (1982)", Memory, 0.5 * (1 + math.Exp(-math.Pi*linewidth*gap)), 1e-8, asked,
			last(fill(white, "ORDER", "k w k"), "population.e")},
		Check{"white noise, echo", "Elliott et al., PRA 26, 12 (1982)", Memory, 0.5 * (1 + math.Exp(-2*math.Pi*linewidth*gap)), 1e-8, asked,
			last(fill(white, "ORDER", "k w m w k"), "population.e")},
		Check{"Ramsey centre: half-width", "Ramsey, Phys. Rev. 78, 695 (1950)", Recomputed, 0.5, 1e-8, asked,
			last(fringe(0.0714013634, 20, "h w h", ""), "population.e")},
		Check{"detuning spread from shot to shot", "Ithier et al., PRB 72, 134519 (2005)", Recomputed,
			0.5 * (1 + math.Exp(-sigma*sigma*gap*gap/2)), 1e-8, asked, last(fringe(0, gap, "k w k", spread), "population.e")},
		Check{"1/e time √2/σ of that spread", "Ithier et al., PRB 72, 134519 (2005)", Recomputed,
			0.5 * (1 + math.Exp(-1)), 1e-8, asked, last(fringe(0, math.Sqrt2/sigma, "k w k", spread), "population.e")},
		Check{"an echo takes that spread out", "Hahn, Phys. Rev. 80, 580 (1950)", Recomputed, 1, 1e-8, asked, last(fringe(0, gap, "k w m w k", spread), "population.e")},
	)
}

func counting() []Check {
	return []Check{{"projection noise, p=½ 100 shots", "Itano et al., PRA 47, 3554 (1993)", Memory, 0.05, 1e-9, "1e-8 on the population",
		last(twoLevels(1, 0, 0, 0, pulse(math.Pi/2)+"[readout]\nbright = \"e\"\nshots = 100\n"), "signal.sd")}}
}
