package validation

import (
	"context"
	"fmt"
	"math"

	"rhotrace/experiment"
)

func rabi() (list []Check) {
	for _, c := range [][4]float64{{1, 1, 2, 0.487840782031462}, {2, -3, 0.7, 0.279262887392484}} {
		list = append(list, Check{
			Name: fmt.Sprintf("Rabi flop, Ω=%g Δ=%g t=%g", c[0], c[1], c[2]), Source: "I. I. Rabi, Phys. Rev. 51, 652 (1937)", Status: Formula,
			Expected: c[3], Tolerance: 1e-8, Why: asked,
			Found: last(twoLevels(c[0], c[1], 0, 0, pulse(c[2])), "population.e"),
		})
	}
	for _, c := range [][3]float64{
		{0.1, 2, 3.98524607486688e-3}, {0.25, 0.5, 3.05429120346740e-3}, {0.25, 2, 2.45652555349403e-2}, {0.25, 10, 5.52943768252080e-2},
		{1, 0.5, 4.79695004492592e-2}, {1, 2, 0.306127967360833}, {1, 10, 0.333548000226546},
		{5, 0.5, 0.729065912696459}, {5, 2, 0.591472346204444}, {5, 10, 0.489952532755387},
	} {
		regime := "over"
		if c[0] == 0.25 {
			regime = "critically "
		} else if c[0] > 0.25 {
			regime = "under"
		}
		list = append(list, Check{
			Name: fmt.Sprintf("%sdamped flop, Ω=%gΓ Γt=%g", regime, c[0], c[1]), Source: "H. C. Torrey, Phys. Rev. 76, 1059 (1949)", Status: Formula,
			Expected: c[2], Tolerance: 1e-8, Why: asked,
			Found: last(twoLevels(c[0], 0, 1, 0, pulse(c[1])), "population.e"),
		})
	}
	// After a photon the atom begins anew in the ground state.
	for _, c := range [][3]float64{{0.2, 1, 0.166704411199119}, {1, 1, 0.430831238822687}, {3, 1, 1.44897178879164}, {3, 2, 0.803863864599673}} {
		list = append(list, Check{
			Name: fmt.Sprintf("photon pairs g2, Ω=%gΓ Γτ=%g", c[0], c[1]), Source: "H. J. Carmichael, D. F. Walls, J. Phys. B 9, 1199 (1976)", Status: Formula,
			Expected: c[2], Tolerance: 3e-6, Why: "1e-8 on populations over a steady population of 0.02 or more",
			Found: ratio(last(twoLevels(c[0], 0, 1, 0, pulse(c[1])), "population.e"), last(twoLevels(c[0], 0, 1, 0, endless), "population.e")),
		})
	}
	return list
}

func steady() []Check {
	const bloch = "optical Bloch equations, textbook"
	const width = 3.43627705518632
	return []Check{
		{"steady state with dephasing", bloch, Formula, 0.307283359914939, 1e-10, "a direct solution", last(twoLevels(1.7, 0.9, 1, 0.3, endless), "population.e")},
		{"steady state", bloch, Formula, 0.288423153692615, 1e-10, "a direct solution", last(twoLevels(1.7, 0.9, 1, 0, endless), "population.e")},
		{"steady coherence, real part", bloch, Formula, 0.305389221556886, 1e-10, "a direct solution", last(twoLevels(1.7, 0.9, 1, 0, endless), "coherence.g:e.re")},
		{"steady coherence, imaginary part", bloch, Formula, 0.169660678642715, 1e-10, "a direct solution", last(twoLevels(1.7, 0.9, 1, 0, endless), "coherence.g:e.im")},
		{"power broadening: half height at half the width", bloch, Formula, 0.5, 1e-10, "a direct solution",
			ratio(last(twoLevels(1.7, width/2, 1, 0.3, endless), "population.e"), last(twoLevels(1.7, 0, 1, 0.3, endless), "population.e"))},
		{"scattering rate, photons per lifetime", bloch, Formula, 0.288423153692615, 1e-10, "a direct solution",
			times(1e-6, last(twoLevels(1.7, 0.9, 1, 0, endless+"[readout]\nemission = [\"x\"]\n"), "signal"))},
		{"long wait reaches the steady state", bloch, Formula, 0.307283359914939, 1e-8, asked, last(twoLevels(1.7, 0.9, 1, 0.3, pulse(80)), "population.e")},
		{"coherence under a laser of 2 kHz width", "D. S. Elliott, R. Roy, S. J. Smith, Phys. Rev. A 26, 12 (1982), from memory", Formula,
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
			Name: fmt.Sprintf("Ramsey fringe with finite pulses, Δ=%g", c[0]), Source: "N. F. Ramsey, Phys. Rev. 78, 695 (1950)", Status: Formula,
			Expected: c[1], Tolerance: 1e-8, Why: asked, Found: last(fringe(c[0], 20, "h w h", ""), "population.e"),
		})
	}
	const sigma, gap = 0.08, 20.0
	spread := "[spread.s]\ndial = \"drive.d.detuning\"\nsigma = \"" + hz(sigma) + "\"\n"
	return append(list,
		Check{"half height a half-width from the centre", "N. F. Ramsey, Phys. Rev. 78, 695 (1950); width recomputed", Recomputed, 0.5, 1e-8, asked,
			last(fringe(0.0714013634, 20, "h w h", ""), "population.e")},
		Check{"detuning that differs from shot to shot", "G. Ithier et al., Phys. Rev. B 72, 134519 (2005)", Formula,
			0.5 * (1 + math.Exp(-sigma*sigma*gap*gap/2)), 1e-8, asked, last(fringe(0, gap, "k w k", spread), "population.e")},
		Check{"its 1/e time √2/σ", "G. Ithier et al., Phys. Rev. B 72, 134519 (2005)", Formula,
			0.5 * (1 + math.Exp(-1)), 1e-8, asked, last(fringe(0, math.Sqrt2/sigma, "k w k", spread), "population.e")},
		Check{"an echo takes it out", "E. L. Hahn, Phys. Rev. 80, 580 (1950)", Formula, 1, 1e-8, asked, last(fringe(0, gap, "k w m w k", spread), "population.e")},
	)
}

func counting() []Check {
	return []Check{{"projection noise of 100 shots at one half", "W. M. Itano et al., Phys. Rev. A 47, 3554 (1993)", Formula, 0.05, 1e-9, "1e-8 on the population",
		last(twoLevels(1, 0, 0, 0, pulse(math.Pi/2)+"[readout]\nbright = \"e\"\nshots = 100\n"), "signal.sd")}}
}

// composite measures 1 − |Tr V†U|²/4 of a π pulse V about the first axis: the
// mean fidelity over the six states along the axes is (2 F + 1)/3 with F =
// |Tr V†U|²/4 (M. A. Nielsen, Phys. Lett. A 303, 249 (2002)).
func composite() (list []Check) {
	for _, c := range []struct {
		name, source string
		pulses       [][2]float64 // area, phase, degrees
		scale, f     float64
		expected     float64
	}{
		{"plain π pulse, 10 % too strong", "closed form", [][2]float64{{180, 0}}, 1.1, 0, 0.02447174185},
		{"plain π pulse, Δ=Ω/10", "closed form", [][2]float64{{180, 0}}, 1, 0.1, 0.009961759664},
		{"BB1 π pulse, 10 % too strong", "S. Wimperis, J. Magn. Reson. A 109, 221 (1994)", [][2]float64{{180, 104.4775121859299}, {360, 313.4325365577897}, {180, 104.4775121859299}, {180, 0}}, 1.1, 0, 9.244851741e-6},
		{"SK1 π pulse, 10 % too strong", "K. R. Brown, A. W. Harrow, I. L. Chuang, Phys. Rev. A 70, 052318 (2004)", [][2]float64{{180, 0}, {360, -104.4775121859299}, {360, 104.4775121859299}}, 1.1, 0, 0.002226103782},
		{"SCROFULOUS π pulse, 10 % too strong", "H. K. Cummins, G. Llewellyn, J. A. Jones, Phys. Rev. A 67, 042308 (2003)", [][2]float64{{180, 60}, {180, 300}, {180, 60}}, 1.1, 0, 4.528134364e-4},
		{"CORPSE π pulse, Δ=Ω/10", "H. K. Cummins, G. Llewellyn, J. A. Jones, Phys. Rev. A 67, 042308 (2003)", [][2]float64{{420, 0}, {300, 180}, {60, 0}}, 1, 0.1, 1.03677763e-5},
		{"short CORPSE π pulse, Δ=Ω/10", "H. K. Cummins, G. Llewellyn, J. A. Jones, Phys. Rev. A 67, 042308 (2003)", [][2]float64{{60, 0}, {300, 180}, {60, 0}}, 1, 0.1, 2.71233426e-4},
	} {
		list = append(list, Check{Name: c.name, Source: c.source, Status: Recomputed, Expected: c.expected, Tolerance: 3e-8, Why: "1e-8 on each of six states",
			Found: func(ctx context.Context) (float64, error) { return infidelity(ctx, c.pulses, c.scale, c.f) }})
	}
	return list
}

func infidelity(ctx context.Context, pulses [][2]float64, scale, f float64) (float64, error) {
	steps, order := "", ""
	for i, p := range pulses {
		steps += fmt.Sprintf("[step.p%d]\non = [\"d\"]\narea = \"%.17g deg\"\n[step.p%d.d]\nphase = \"%.17g deg\"\n", i, p[0], i, p[1])
		order += fmt.Sprintf("p%d ", i)
	}
	text := twoLevels(1, f, 0, 0, steps+"[sequence]\norder = \""+order+"\"\n[record]\ncoherences = \"all\"\n")
	turn := experiment.Turn{Path: "drive.d.rabi", Value: scale / (2 * math.Pi) * 1e6}
	sum := 0.0
	for _, pole := range []string{"g", "e"} { // a π pulse exchanges the poles
		t, err := run(ctx, text+"[start]\npopulations = { "+pole+" = 1 }\n", turn)
		if err != nil {
			return 0, err
		}
		other := map[string]string{"g": "e", "e": "g"}[pole]
		v, err := lastOf(t, "population."+other)
		if err != nil {
			return 0, err
		}
		sum += v
	}
	for _, chi := range []float64{0, 90, 180, 270} { // and turns g + e^{iχ}e into g + e^{−iχ}e
		t, err := run(ctx, text+fmt.Sprintf("[start]\npopulations = { g = 0.5, e = 0.5 }\nphases = { g = \"0 deg\", e = \"%g deg\" }\n", chi), turn)
		if err != nil {
			return 0, err
		}
		re, err := lastOf(t, "coherence.g:e.re")
		if err != nil {
			return 0, err
		}
		im, err := lastOf(t, "coherence.g:e.im")
		if err != nil {
			return 0, err
		}
		sin, cos := math.Sincos(-chi * math.Pi / 180)
		sum += 0.5 + re*cos - im*sin
	}
	return 1 - (3*sum/6-1)/2, nil
}
