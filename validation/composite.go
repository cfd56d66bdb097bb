package validation

import (
	"context"
	"fmt"
	"math"

	"rhotrace/experiment"
)

// BB1 and SK1 correct by pulses of phase arccos(−θ/4π).
const (
	phasePi   = 104.4775121859299
	phaseHalf = 97.1807557814582
)

// composite compares 1 − |Tr V†U|²/4. The figures for Δ = 0.1Ω were computed with
// (Ω/2)(e^{iφ}|e⟩⟨g| + h.c.); here φ has the other sign, and the mirror image has the
// same infidelity at Δ = −0.1Ω (2 % of it for BB1 hang on that sign).
func composite() (list []Check) {
	const plain = "closed form"
	const bb1, sk1, corpse = "Wimperis, JMR A 109, 221 (1994)", "Brown et al., PRA 70, 052318 (2004)", "Cummins et al., PRA 67, 042308 (2003)"
	pi := [][2]float64{{180, 0}}
	bb := [][2]float64{{180, phasePi}, {360, 3 * phasePi}, {180, phasePi}, {180, 0}}
	sk := [][2]float64{{180, 0}, {360, -phasePi}, {360, phasePi}}
	scrofulous := [][2]float64{{180, 60}, {180, 300}, {180, 60}}
	long := [][2]float64{{420, 0}, {300, 180}, {60, 0}}
	short := [][2]float64{{60, 0}, {300, 180}, {60, 0}}
	half := [][2]float64{{90, 0}}
	bbHalf := [][2]float64{{180, phaseHalf}, {360, 3 * phaseHalf}, {180, phaseHalf}, {90, 0}}
	skHalf := [][2]float64{{90, 0}, {360, -phaseHalf}, {360, phaseHalf}}
	k := math.Asin(0.5*math.Sin(math.Pi/4)) * 180 / math.Pi
	longHalf := [][2]float64{{405 - k, 0}, {360 - 2*k, 180}, {45 - k, 0}}
	shortHalf := [][2]float64{{45 - k, 0}, {360 - 2*k, 180}, {45 - k, 0}}
	for _, c := range []struct {
		name, source    string
		angle           float64
		pulses          [][2]float64 // area, phase, degrees
		strong, detuned float64      // infidelity at Ω(1 + 0.1), and at Δ = 0.1Ω
	}{
		{"plain π", plain, 180, pi, 0.02447174185, 0.009961759664},
		{"BB1 π", bb1, 180, bb, 9.244851741e-6, 0.01001868368},
		{"SK1 π", sk1, 180, sk, 0.002226103782, 0.009910762265},
		{"SCROFULOUS π", corpse, 180, scrofulous, 4.528134364e-4, 0.03908882425},
		{"CORPSE π", corpse, 180, long, 0.02447174185, 1.03677763e-5},
		{"short CORPSE π", corpse, 180, short, 0.02447174185, 2.71233426e-4},
		{"plain π/2", plain, 90, half, 0.006155829702, 0.004991312809},
		{"BB1 π/2", bb1, 90, bbHalf, 1.827118179e-6, 0.00476993078},
		{"SK1 π/2", sk1, 90, skHalf, 5.857927747e-4, 0.005321790786},
		{"CORPSE π/2", corpse, 90, longHalf, 0.006155829702, 9.759869546e-6},
		{"short CORPSE π/2", corpse, 90, shortHalf, 0.05449673791, 2.513683406e-4},
	} {
		for _, e := range []struct {
			what               string
			scale, f, expected float64
		}{{"10 % too strong", 1.1, 0, c.strong}, {"|Δ|=Ω/10", 1, -0.1, c.detuned}} {
			list = append(list, Check{Name: c.name + ", " + e.what, Source: c.source, Status: Recomputed, Expected: e.expected, Tolerance: 1e-11,
				Why:   "constant pulses are exact to rounding; ten digits printed of 0.05 at most",
				Found: func(ctx context.Context) (float64, error) { return infidelity(ctx, c.angle, c.pulses, e.scale, e.f) }})
		}
	}
	return list
}

// infidelity is 1 − |Tr V†U|²/4 of a rotation V by angle about the axis of phase
// 0: the mean fidelity over the six states along the axes is (2F + 1)/3 with F =
// |Tr V†U|²/4 (Nielsen, Phys. Lett. A 303, 249 (2002)).
func infidelity(ctx context.Context, angle float64, pulses [][2]float64, scale, f float64) (float64, error) {
	steps, order := "", ""
	for i, p := range pulses {
		steps += fmt.Sprintf("[step.p%d]\non = [\"d\"]\narea = \"%.17g deg\"\n[step.p%d.d]\nphase = \"%.17g deg\"\n", i, p[0], i, p[1])
		order += fmt.Sprintf("p%d ", i)
	}
	text := twoLevels(1, f, 0, 0, steps+"[sequence]\norder = \""+order+"\"\n[record]\ncoherences = \"all\"\n")
	turn := experiment.Turn{Path: "drive.d.rabi", Value: scale / (2 * math.Pi) * 1e6}
	sin, cos := math.Sincos(angle * math.Pi / 180)
	mean := 0.0
	for _, c := range []struct {
		start   string
		x, y, z float64 // Bloch vector, e up: ρ_ge = (x + iy)/2
	}{
		{"populations = { e = 1 }", 0, 0, 1}, {"populations = { g = 1 }", 0, 0, -1},
		{superposed(0), 1, 0, 0}, {superposed(180), -1, 0, 0}, {superposed(90), 0, 1, 0}, {superposed(-90), 0, -1, 0},
	} {
		t, err := run(ctx, text+"[start]\n"+c.start+"\n", turn)
		if err != nil {
			return 0, err
		}
		found := make([]float64, 4)
		for i, column := range []string{"coherence.g:e.re", "coherence.g:e.im", "population.e", "population.g"} {
			if found[i], err = lastOf(t, column); err != nil {
				return 0, err
			}
		}
		y, z := c.y*cos-c.z*sin, c.y*sin+c.z*cos // V turns about x
		mean += 0.5 * (1 + 2*found[0]*c.x + 2*found[1]*y + (found[2]-found[3])*z) / 6
	}
	return 1 - (3*mean-1)/2, nil
}

func superposed(degrees float64) string {
	return fmt.Sprintf("populations = { g = 0.5, e = 0.5 }\nphases = { g = \"%g deg\", e = \"0 deg\" }", degrees)
}
