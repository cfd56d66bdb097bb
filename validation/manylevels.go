package validation

import (
	"context"
	"fmt"
	"math"
	"strings"
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
	const weak = 1e-4
	const review = "M. Fleischhauer, A. Imamoglu, J. P. Marangos, Rev. Mod. Phys. 77, 633 (2005)"
	for _, c := range [][5]float64{{0.2, 0, 0, -0.56939502, -0.17793594}, {0.7, -0.3, 0, 0.92997812, -1.36761488}, {0, 0, 0.05, 0, -0.12987013}, {0.2, 0, 0.05, -0.48427073, -0.29933270}} {
		text := threeLevels(weak, 1.2, c[0], c[1], 0.6, 0.4, c[2], both)
		name := fmt.Sprintf("weak probe, Δp=%g Δc=%g γ=%g, ", c[0], c[1], c[2])
		const why = "terms of order Ωp² beyond the weak probe"
		list = append(list,
			Check{name + "dispersion", review, Formula, c[3], 2e-7, why, times(2/weak, last(text, "coherence.a:c.re"))},
			Check{name + "absorption", review, Formula, c[4], 2e-7, why, times(-2/weak, last(text, "coherence.a:c.im"))})
	}
	absorption := func(dress, delta float64) func(context.Context) (float64, error) {
		return times(1/weak, last(threeLevels(weak, dress, delta, 0, 0.6, 0.4, 0, both), "coherence.a:c.im")) // γ31 · 2 Im ρ_ac/Ωp
	}
	list = append(list,
		Check{"transparency: half the absorption at half its width", review, Formula, 0.5, 2e-7, "terms of order Ωp² beyond the weak probe", absorption(0.5, 0.207106781187/2)},
		Check{"split line: full absorption at half the dressing frequency", "S. H. Autler, C. H. Townes, Phys. Rev. 100, 703 (1955)", Formula, 1, 2e-7, "terms of order Ωp² beyond the weak probe", absorption(1.2, 0.6)},
		Check{"dark state, first level", "E. Arimondo, Prog. Opt. 35, 257 (1996)", Formula, 0.64, 1e-9, "a direct solution", last(threeLevels(0.3, 0.4, 0, 0, 0.5, 0.5, 0, both), "population.a")},
		Check{"dark state, second level", "E. Arimondo, Prog. Opt. 35, 257 (1996)", Formula, 0.36, 1e-9, "a direct solution", last(threeLevels(0.3, 0.4, 0, 0, 0.5, 0.5, 0, both), "population.b")},
		Check{"optical pumping, share per lifetime", "rate equations, textbook; exact rate recomputed", Recomputed, 1.59948784e-4, 2e-10, "the digits printed, and 1e-8 on populations over 400 lifetimes", pumping},
		Check{"Raman π pulse, Δ=50Ω", "closed form; transfer recomputed", Recomputed, 0.99999990, 5e-8, printed, raman})
	return list
}

// pumping is the rate at which the driven lower level empties, after the first
// transient.
func pumping(ctx context.Context) (float64, error) {
	text := threeLevels(0.02, 0, 0, 0, 0.6, 0.4, 0, `[step.s]
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

// raman is the largest transfer round the two-photon π time.
func raman(ctx context.Context) (float64, error) {
	text := threeLevels(1, 1, 50, 50, 0, 0, 0, "[step.s]\non = [\"p\", \"q\"]\nlasts = \"340 us\"\n[sequence]\norder = \"s\"\n[record]\nsamples = 68001\n")
	t, err := run(ctx, text)
	if err != nil {
		return 0, err
	}
	most := 0.0
	for _, p := range t.Column("population.b").Values {
		most = math.Max(most, p)
	}
	return most, nil
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
	const source = "K. Bergmann, H. Theuer, B. W. Shore, Rev. Mod. Phys. 70, 1003 (1998); numbers recomputed"
	for _, c := range [][2]float64{{5, 0.785502341901}, {10, 0.972714222606}, {20, 0.999621515926}, {40, 0.999837886777}} {
		list = append(list, Check{Name: fmt.Sprintf("adiabatic passage over a dark state, Ω₀T=%g", c[0]), Source: source, Status: Recomputed,
			Expected: c[1], Tolerance: 2e-8, Why: asked, Found: last(pulses(c[0], "7.4 us", "8.6 us"), "population.c")})
	}
	list = append(list, Check{"pulses in the other order, Ω₀T=20", source, Recomputed, 0.043386116713, 2e-8, asked, last(pulses(20, "8.6 us", "7.4 us"), "population.c")})
	for _, c := range [][2]float64{{0.5, 0.675231906655777}, {1, 0.207879576350762}} {
		list = append(list, Check{Name: fmt.Sprintf("sweep through resonance, Ω=%g √α", c[0]), Source: "C. Zener, Proc. R. Soc. A 137, 696 (1932)", Status: Formula,
			Expected: c[1], Tolerance: 2 * c[0] / 200, Why: "a sweep over ±200/√α leaves an oscillation of about Ω/αT",
			Found: last("[level.g]\n[level.e]\n[drive.d]\nbetween = [\"g\", \"e\"]\nrabi = \""+hz(c[0])+"\"\n[step.p]\non = [\"d\"]\nlasts = \"400 us\"\nchirp = \""+hz(400)+"\"\n[sequence]\norder = \"p\"\n", "population.g")})
	}
	return list
}

// motion is the flop of a thermal ion: each motional state has a Rabi frequency
// of its own.
func motion() (list []Check) {
	const states = 26
	for _, c := range []struct {
		mean, turns, expected float64
		blue                  bool
	}{{0.5, 0.5, 0.999574654076, false}, {0.5, 1, 0.00169737301572, false}, {0.5, 2.5, 0.613657029612, true}, {0.5, 5, 0.82924212249, true}} {
		list = append(list, Check{
			Name:   fmt.Sprintf("thermal ion, n̄=%g, %g turns%s", c.mean, c.turns, map[bool]string{true: " on the blue sideband"}[c.blue]),
			Source: "D. J. Wineland et al., J. Res. NIST 103, 259 (1998)", Status: Formula, Expected: c.expected, Tolerance: 2e-8, Why: asked + "; the tail beyond 26 states holds 4e-13",
			Found: func(ctx context.Context) (float64, error) { return flop(ctx, states, c.mean, c.turns, c.blue) },
		})
	}
	return list
}

func flop(ctx context.Context, states int, mean, turns float64, blue bool) (float64, error) {
	const eta = 0.1
	shift := 0
	if blue {
		shift = 1
	}
	var levels, pairs, start []string
	norm := 0.0
	for n := range states {
		norm += math.Pow(mean/(mean+1), float64(n)) / (mean + 1)
	}
	for n := range states {
		levels = append(levels, fmt.Sprintf("[level.g%d]", n))
		start = append(start, fmt.Sprintf("g%d = %.17g", n, math.Pow(mean/(mean+1), float64(n))/(mean+1)/norm))
	}
	for n := range states + shift {
		levels = append(levels, fmt.Sprintf("[level.e%d]", n))
	}
	for n := range states {
		pairs = append(pairs, fmt.Sprintf("\"g%d:e%d\" = %.17g", n, n+shift, coupling(eta, n, shift)))
	}
	t, err := run(ctx, strings.Join(levels, "\n")+"\n[drive.d]\npairs = { "+strings.Join(pairs, ", ")+" }\nrabi = \"1 MHz\"\n[start]\npopulations = { "+strings.Join(start, ", ")+
		" }\n[step.p]\non = [\"d\"]\nlasts = \""+us(turns)+"\"\n[sequence]\norder = \"p\"\n")
	if err != nil {
		return 0, err
	}
	sum := 0.0
	for n := range states + shift {
		v, err := lastOf(t, fmt.Sprintf("population.e%d", n))
		if err != nil {
			return 0, err
		}
		sum += v
	}
	return sum, nil
}

// coupling is Ω_{n,n+s}/Ω = e^{−η²/2} η^s √(n!/(n+s)!) L_n^s(η²).
func coupling(eta float64, n, s int) float64 {
	x := eta * eta
	a, b := 1.0, 1+float64(s)-x // Laguerre polynomials by their recursion
	if n == 0 {
		b = a
	}
	for k := 1; k < n; k++ {
		a, b = b, ((2*float64(k)+1+float64(s)-x)*b-(float64(k)+float64(s))*a)/float64(k+1)
	}
	f := math.Exp(-x/2) * math.Pow(eta, float64(s))
	for k := n + 1; k <= n+s; k++ {
		f /= math.Sqrt(float64(k))
	}
	return f * b
}
