package validation

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
)

// motion is the flop of a thermal ion: each motional state has a Rabi frequency
// of its own.
func motion() (list []Check) {
	const source = "J. Res. NIST 103, 259 (1998)"
	for _, c := range []struct {
		mean     float64
		states   int
		turns    float64 // Ωt/2π
		sideband int
		expected float64
	}{
		{0.5, 26, 0.5, 0, 0.999574654076}, {0.5, 26, 1, 0, 0.00169737301572}, {0.5, 26, 2, 0, 0.00672606132158},
		{0.5, 26, 2.5, 1, 0.613657029612}, {0.5, 26, 5, 1, 0.82924212249}, {0.5, 26, 2.5, -1, 0.204552343204}, {0.5, 26, 5, -1, 0.27641404083},
		{5, 120, 0.5, 0, 0.986627819973}, {5, 120, 2, 0, 0.155953410725}, {5, 120, 2.5, 1, 0.687492043084}, {5, 120, 5, -1, 0.44318542258},
	} {
		line := map[int]string{-1: "red", 0: "carrier", 1: "blue"}[c.sideband]
		list = append(list, Check{
			Name:   fmt.Sprintf("ion n̄=%g, %s, Ωt=%gπ", c.mean, line, 2*c.turns),
			Source: source, Status: Recomputed, Expected: c.expected, Tolerance: 1e-8, Why: asked + " (all pairs have one); 1e-9 of the ion is beyond the last state kept",
			Found: flop(c.states, c.mean, c.turns, c.sideband),
		})
	}
	return append(list, Check{Name: "red over blue, n̄=0.3", Source: source, Status: Recomputed, Expected: 0.230769230769, Tolerance: 1e-7, Why: asked + ", over a blue signal of a half",
		Found: ratio(flop(26, 0.3, 2.5, -1), flop(26, 0.3, 2.5, 1))})
}

func flop(states int, mean, turns float64, sideband int) func(context.Context) (float64, error) {
	const eta = 0.1
	weights := make([]float64, states)
	for n := range weights {
		weights[n] = math.Pow(mean/(mean+1), float64(n)) / (mean + 1)
	}
	return ladder("g", "e", weights, sideband, turns, func(n int) float64 {
		return coupling(eta, min(n, n+sideband), max(sideband, -sideband))
	})
}

// cavity is an atom in a cavity that holds a coherent field: H = g (aσ⁺ + a⁺σ⁻)
// joins (e, n) with (g, n + 1) by g√(n + 1), half a Rabi frequency.
func cavity() (list []Check) {
	for _, c := range [][3]float64{{10, 0.5, 0.0596369141696}, {10, 1, 0.799951762566}, {10, 3, 0.502371172517}, {25, 1, 0.27294410282}, {25, 3, 0.505684053102}} {
		mean, gt := c[0], c[1]
		weights := make([]float64, int(mean)*2+28)
		for n := range weights {
			l, _ := math.Lgamma(float64(n) + 1)
			weights[n] = math.Exp(float64(n)*math.Log(mean) - mean - l)
		}
		// Ω = 2g, so that Ωt/2π turns are gt/π.
		leaves := ladder("e", "g", weights, 1, gt/math.Pi, func(n int) float64 { return math.Sqrt(float64(n) + 1) })
		list = append(list, Check{Name: fmt.Sprintf("cavity, coherent n̄=%g, gt=%g", mean, gt), Source: "Cummings, PR 140, A1051 (1965)", Status: Recomputed, Expected: c[2], Tolerance: 1e-8,
			Why:   asked + " (all pairs have one); 1e-9 of the field is beyond the last state kept",
			Found: func(ctx context.Context) (float64, error) { p, err := leaves(ctx); return 1 - p, err }})
	}
	return list
}

// ladder starts in from-states n with weights (divided by their sum), joined to
// to-states n + step by one drive of 1 MHz times element(n), and finds the share
// in the to-states after the given turns. The to-states are the drive's upper
// ones, which on resonance makes no difference.
func ladder(from, to string, weights []float64, step int, turns float64, element func(n int) float64) func(context.Context) (float64, error) {
	norm := 0.0
	for _, w := range slices.Backward(weights) {
		norm += w
	}
	var levels, pairs, start, ends []string
	for n, w := range weights {
		levels = append(levels, fmt.Sprintf("[level.%s%d]", from, n))
		start = append(start, fmt.Sprintf("%s%d = %.17g", from, n, w/norm))
		if n+step < 0 {
			continue
		}
		end := fmt.Sprintf("%s%d", to, n+step)
		ends = append(ends, end)
		pairs = append(pairs, fmt.Sprintf("\"%s%d:%s\" = %.17g", from, n, end, element(n)))
	}
	for _, end := range ends {
		levels = append(levels, "[level."+end+"]")
	}
	text := strings.Join(levels, "\n") + "\n[drive.d]\npairs = { " + strings.Join(pairs, ", ") + " }\nrabi = \"1 MHz\"\n[start]\npopulations = { " + strings.Join(start, ", ") +
		" }\n[step.p]\non = [\"d\"]\nlasts = \"" + us(turns) + "\"\n[sequence]\norder = \"p\"\n"
	return func(ctx context.Context) (float64, error) {
		t, err := run(ctx, text)
		if err != nil {
			return 0, err
		}
		share := 0.0
		for _, end := range ends {
			p, err := lastOf(t, "population."+end)
			if err != nil {
				return 0, err
			}
			share += p
		}
		return share, nil
	}
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
