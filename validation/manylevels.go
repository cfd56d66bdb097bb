package validation

import (
	"context"
	"fmt"
	"math"
)

// threeLevels is a Λ system: levels a and b below c. Angular numbers per µs;
// decays of c, dephasing of b.
func threeLevels(probe, dress, deltaProbe, deltaDress, toA, toB, dephasing float64, tail string) string {
	return fill(`[level.a]
[level.b]
[level.c]
[drive.p]
between = ["a", "c"]
rabi = "PROBE"
detuning = "DPROBE"
[drive.q]
between = ["b", "c"]
rabi = "DRESS"
detuning = "DDRESS"
[decay.x]
from = "c"
to = "a"
rate = "TOA"
[decay.y]
from = "c"
to = "b"
rate = "TOB"
[dephasing.z]
weights = { b = 1 }
rate = "PHI"
`, "DPROBE", hz(deltaProbe), "DDRESS", hz(deltaDress), "PROBE", hz(probe), "DRESS", hz(dress), "TOA", perUs(toA), "TOB", perUs(toB), "PHI", perUs(dephasing)) + tail
}

const both = "[step.s]\non = [\"p\", \"q\"]\n[sequence]\norder = \"s\"\n[record]\nwhen = \"steady\"\ncoherences = \"all\"\n"

func lambda() (list []Check) {
	const weak = 1e-5
	const review, townes = "Rev. Mod. Phys. 77, 633 (2005)", "Autler, Townes, PR 100, 703 (1955)"
	const why = "eight digits printed, terms (Ωp/Ωc)² beyond the weak probe, rounding over Ωp"
	for _, c := range [][5]float64{{0.2, 0, 0, -0.56939502, -0.17793594}, {0.7, -0.3, 0, 0.92997812, -1.36761488}, {0, 0, 0.05, 0, -0.12987013}, {0.2, 0, 0.05, -0.48427073, -0.29933270}} {
		text := threeLevels(weak, 1.2, c[0], c[1], 0.6, 0.4, c[2], both)
		name := fmt.Sprintf("probe Δp=%g Δc=%g γ=%g, ", c[0], c[1], c[2])
		list = append(list, // the upper level stands first in ρ31, last in a:c
			Check{name + "real", review, Recomputed, c[3], 1e-8, why, times(2/weak, last(text, "coherence.a:c.re"))},
			Check{name + "imag.", review, Recomputed, c[4], 1e-8, why, times(-2/weak, last(text, "coherence.a:c.im"))})
	}
	absorption := func(dress, delta float64) func(context.Context) (float64, error) {
		return times(1/weak, last(threeLevels(weak, dress, delta, 0, 0.6, 0.4, 0, both), "coherence.a:c.im")) // γ31 · 2 Im ρ_ac/Ωp
	}
	for _, c := range [][2]float64{{0.1, 9.901951359e-3}, {0.5, 0.207106781187}, {1, 0.618033988750}, {2, 1.561552812809}} {
		list = append(list, Check{fmt.Sprintf("transparency, half-width, Ωc=%gΓ", c[0]), review, Recomputed, 0.5, 1e-7, why + "; ten digits of the width, 0.01 at least", absorption(c[0], c[1]/2)})
	}
	list = append(list,
		Check{"split line, absorption at Ωc/2", townes, Recomputed, 1, 1e-7, why, absorption(1.2, 0.6)},
		Check{"dark state, first level", "Arimondo, Prog. Opt. 35, 257 (1996)", Recomputed, 0.64, 1e-9, direct, last(threeLevels(0.3, 0.4, 0, 0, 0.5, 0.5, 0, both), "population.a")},
		Check{"dark state, second level", "Arimondo, Prog. Opt. 35, 257 (1996)", Recomputed, 0.36, 1e-9, direct, last(threeLevels(0.3, 0.4, 0, 0, 0.5, 0.5, 0, both), "population.b")},
		Check{"dark state, coherence", "Arimondo, Prog. Opt. 35, 257 (1996)", Recomputed, -0.48, 1e-9, direct, last(threeLevels(0.3, 0.4, 0, 0, 0.5, 0.5, 0, both), "coherence.a:b.re")})
	for _, c := range [][3]float64{{0.02, 0, 1.59948784e-4}, {0.05, 1, 1.99792208e-4}} {
		list = append(list, Check{fmt.Sprintf("pumping rate, Ω=%gΓ Δ=%gΓ", c[0], c[1]), "rate equations", Recomputed, c[2], 1e-10,
			"1e-8 on two populations over 400 lifetimes; nine digits printed", func(ctx context.Context) (float64, error) { return pumping(ctx, c[0], c[1]) }})
	}
	for _, c := range [][2]float64{{1, 0.99999990}, {0.5, 0.99980437}} {
		// The π time of Ω1Ω2/2Δ, with the difference of the light shifts tuned out.
		const delta = 50
		text := threeLevels(1, c[0], delta, delta+(1-c[0]*c[0])/(4*delta), 0, 0, 0, fill(pulse(2*math.Pi*delta/c[0]), "\"d\"", "\"p\", \"q\""))
		list = append(list, Check{fmt.Sprintf("Raman π pulse, Ω₂=%gΩ₁ Δ=50Ω₁", c[0]), "adiabatic elimination", Recomputed, c[1], 1.5e-8, asked + "; eight digits printed", last(text, "population.b")})
	}
	return list
}

// beats is the light of two upper levels that decay together, split by 6Γ.
func beats() []Check {
	const t = 0.4
	text := `[level.g]
[level.u]
[level.v]
[shift.split]
weights = { v = 1 }
size = "` + hz(6) + `"
[decay.u]
from = "u"
to = "g"
rate = "1 /us"
[decay.v]
from = "v"
to = "g"
rate = "1 /us"
[start]
populations = { u = 0.5, v = 0.5 }
phases = { u = "0 deg", v = "0 deg" }
[step.w]
lasts = "` + us(t) + `"
[sequence]
order = "w"
[record]
coherences = ["u:v"]
`
	light := sum(sum(last(text, "population.u"), last(text, "population.v")), times(2, last(text, "coherence.u:v.re")))
	return []Check{{"quantum beats, ω=6Γ Γt=0.4", "two levels, one detector", Recomputed, 0.176030256687640, 4e-8, "1e-8 on four elements of ρ", light}}
}

// pumping is the rate at which the driven lower level empties, after the first
// transient.
func pumping(ctx context.Context, omega, delta float64) (float64, error) {
	text := threeLevels(omega, 0, delta, delta, 0.6, 0.4, 0, `[step.s]
on = ["p"]
lasts = "500 us"
[sequence]
order = "s"
[record]
samples = 6
`)
	t, err := run(ctx, text)
	if err != nil {
		return 0, err
	}
	p := t.Column("population.a").Values
	return math.Log(p[1]/p[5]) / 400, nil
}

// adiabatic are pulses that overlap and frequencies that sweep.
func adiabatic() (list []Check) {
	pulses := func(peak float64, stokes, pump string) string {
		return fill(`[level.a]
[level.b]
[level.c]
[drive.p]
between = ["a", "b"]
rabi = "PEAK"
[drive.s]
between = ["c", "b"]
rabi = "PEAK"
[step.x]
on = ["p", "s"]
lasts = "16 us"
[step.x.p]
shape = "gaussian"
width = "0.70710678118654757 us"
centre = "PUMP"
[step.x.s]
shape = "gaussian"
width = "0.70710678118654757 us"
centre = "STOKES"
[sequence]
order = "x"
`, "PEAK", hz(peak), "PUMP", pump, "STOKES", stokes)
	}
	const source = "Bergmann et al., RMP 70, 1003 (1998)"
	for _, c := range [][2]float64{{5, 0.785502341901}, {10, 0.972714222606}, {20, 0.999621515926}, {40, 0.999837886777}} {
		list = append(list, Check{Name: fmt.Sprintf("passage over a dark state, Ω₀T=%g", c[0]), Source: source, Status: Recomputed,
			Expected: c[1], Tolerance: 1e-8, Why: asked, Found: last(pulses(c[0], "7.4 us", "8.6 us"), "population.c")})
	}
	for i, p := range []float64{2.28681534e-4, 0.956385201753, 0.043386116713} {
		list = append(list, Check{fmt.Sprintf("pulses in the other order, ρ%[1]d%[1]d", i+1), source, Recomputed, p, 1e-8, asked,
			last(pulses(20, "8.6 us", "7.4 us"), "population."+"abc"[i:i+1])})
	}
	loss := "[level.d]\n[decay.x]\nfrom = \"b\"\nto = \"d\"\nrate = \"5 /us\"\n"
	list = append(list, Check{"passage with loss, Ω₀T=20 ΓT=5", source, Recomputed, 0.938423318772, 1e-8, asked, last(pulses(20, "7.4 us", "8.6 us")+loss, "population.c")})
	for _, c := range [][2]float64{{0.5, 0.675231906655777}, {1, 0.207879576350762}} {
		// Before and after the sweep the levels are mixed by Ω/2αT: the amplitude
		// √P takes up twice that times √(1 − P), its square twice again, and the
		// next order is below (Ω/αT)².
		const from = 400.0
		list = append(list, Check{Name: fmt.Sprintf("sweep through resonance, Ω=%g√α", c[0]), Source: "Zener, PRSA 137, 696 (1932)", Status: Recomputed,
			Expected: c[1], Tolerance: 2*c[0]/from*math.Sqrt(c[1]*(1-c[1])) + math.Pow(c[0]/from, 2), Why: "the sweep is finite, ±T√α = 400: 2√(P(1 − P)) Ω/αT + (Ω/αT)²",
			Found: last(fill("[level.g]\n[level.e]\n[drive.d]\nbetween = [\"g\", \"e\"]\nrabi = \"OMEGA\"\n[step.p]\non = [\"d\"]\nlasts = \"800 us\"\nchirp = \"SWEEP\"\n[sequence]\norder = \"p\"\n",
				"OMEGA", hz(c[0]), "SWEEP", hz(2*from)), "population.g")})
	}
	return list
}
