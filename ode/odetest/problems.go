// Package odetest holds initial value problems with exact answers, for tests and
// benchmarks. The letters are those of T. E. Hull, W. H. Enright, B. M. Fellen,
// A. E. Sedgwick, "Comparing numerical methods for ordinary differential
// equations", SIAM J. Numer. Anal. 9, 603 (1972).
package odetest

import "math"

// Problem is dy/dt = Slope(t, y) from Start at time 0 until End.
type Problem struct {
	Name  string
	Start []float64
	End   float64
	Slope func(t float64, y, dydt []float64) error
	Exact func(t float64, y []float64)
	// Contracts says that solutions do not move apart from Start to End, so that
	// errors made on the way are not larger at the end.
	Contracts bool
}

// Problems returns all problems.
func Problems() []Problem {
	return []Problem{
		Decay(), Root(), Cosine(), Logistic(), Turning(40), Orbit(0.1), Orbit(0.5), Orbit(0.9),
	}
}

// Decay is A1: y' = −y, y = e^{−t}.
func Decay() Problem {
	return Problem{"A1 decay", []float64{1}, 20,
		func(_ float64, y, d []float64) error { d[0] = -y[0]; return nil },
		func(t float64, y []float64) { y[0] = math.Exp(-t) }, true}
}

// Root is A2: y' = −y³/2, y = 1/√(1+t).
func Root() Problem {
	return Problem{"A2 root", []float64{1}, 20,
		func(_ float64, y, d []float64) error { d[0] = -y[0] * y[0] * y[0] / 2; return nil },
		func(t float64, y []float64) { y[0] = 1 / math.Sqrt(1+t) }, true}
}

// Cosine is A3: y' = y cos t, y = e^{sin t}.
func Cosine() Problem {
	return Problem{"A3 cosine", []float64{1}, 20,
		func(t float64, y, d []float64) error { d[0] = y[0] * math.Cos(t); return nil },
		func(t float64, y []float64) { y[0] = math.Exp(math.Sin(t)) }, false}
}

// Logistic is A4: y' = y(1 − y/20)/4, y = 20/(1 + 19e^{−t/4}).
func Logistic() Problem {
	return Problem{"A4 logistic", []float64{1}, 20,
		func(_ float64, y, d []float64) error { d[0] = y[0] / 4 * (1 - y[0]/20); return nil },
		func(t float64, y []float64) { y[0] = 20 / (1 + 19*math.Exp(-t/4)) }, false}
}

// Turning is pairs of numbers that turn at the rates 1 … 2, beside each other:
// every norm is conserved.
func Turning(pairs int) Problem {
	start := make([]float64, 2*pairs)
	for p := range pairs {
		start[2*p] = 1 / math.Sqrt(float64(pairs))
	}
	rate := func(p int) float64 { return 1 + float64(p)/float64(pairs) }
	return Problem{"turning", start, 20,
		func(_ float64, y, d []float64) error {
			for p := range pairs {
				w := rate(p)
				d[2*p], d[2*p+1] = -w*y[2*p+1], w*y[2*p]
			}
			return nil
		},
		func(t float64, y []float64) {
			for p := range pairs {
				sin, cos := math.Sincos(rate(p) * t)
				y[2*p], y[2*p+1] = start[2*p]*cos, start[2*p]*sin
			}
		}, true}
}

// Orbit is class D: two bodies under gravity, eccentricity e, from the nearest
// point; the exact place follows from Kepler's equation t = u − e sin u.
func Orbit(e float64) Problem {
	name := map[float64]string{0.1: "D1 orbit", 0.5: "D3 orbit", 0.9: "D5 orbit"}[e]
	return Problem{name, []float64{1 - e, 0, 0, math.Sqrt((1 + e) / (1 - e))}, 20,
		func(_ float64, y, d []float64) error {
			r := math.Hypot(y[0], y[1])
			d[0], d[1], d[2], d[3] = y[2], y[3], -y[0]/(r*r*r), -y[1]/(r*r*r)
			return nil
		},
		func(t float64, y []float64) {
			low, high := t-1, t+1 // u − e sin u rises
			for range 100 {
				if u := (low + high) / 2; u-e*math.Sin(u) < t {
					low = u
				} else {
					high = u
				}
			}
			sin, cos := math.Sincos((low + high) / 2)
			b, n := math.Sqrt(1-e*e), 1/(1-e*cos)
			y[0], y[1], y[2], y[3] = cos-e, b*sin, -sin*n, b*cos*n
		}, false}
}
