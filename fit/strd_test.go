package fit

import (
	"bufio"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// strdProblem is one file of testdata/strd (see the note there).
type strdProblem struct {
	starts         [2][]float64
	params, errors []float64
	rss            float64
	x, y           []float64
}

func readSTRD(t testing.TB, name string) strdProblem {
	file, err := os.Open(filepath.Join("testdata", "strd", name+".dat"))
	require.NoError(t, err)
	defer file.Close()
	var p strdProblem
	parameter := regexp.MustCompile(`^\s*b\d+ =(.*)$`)
	number := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		require.NoError(t, err)
		return v
	}
	data := false
	lines := bufio.NewScanner(file)
	for n := 1; lines.Scan(); n++ {
		line := lines.Text()
		if m := parameter.FindStringSubmatch(line); m != nil {
			f := strings.Fields(m[1])
			require.Len(t, f, 4)
			p.starts[0] = append(p.starts[0], number(f[0]))
			p.starts[1] = append(p.starts[1], number(f[1]))
			p.params = append(p.params, number(f[2]))
			p.errors = append(p.errors, number(f[3]))
		}
		if rest, found := strings.CutPrefix(line, "Residual Sum of Squares:"); found {
			p.rss = number(strings.TrimSpace(rest))
		}
		if data && strings.TrimSpace(line) != "" {
			f := strings.Fields(line)
			p.y, p.x = append(p.y, number(f[0])), append(p.x, number(f[1]))
		}
		data = data || n > 50 && strings.HasPrefix(line, "Data:")
	}
	require.NoError(t, lines.Err())
	require.NotEmpty(t, p.y)
	return p
}

// The models of the problems, with their slopes written by hand.
var strdModels = map[string]func(x float64, b, g []float64) float64{
	"Misra1a": saturating, "BoxBOD": saturating,
	"Eckerle4": func(x float64, b, g []float64) float64 {
		u := (x - b[2]) / b[1]
		e := math.Exp(-0.5*u*u) / b[1]
		if g != nil {
			g[0] = e
			g[1] = b[0] * e * (u*u - 1) / b[1]
			g[2] = b[0] * e * u / b[1]
		}
		return b[0] * e
	},
	"Gauss1": func(x float64, b, g []float64) float64 {
		e := math.Exp(-b[1] * x)
		u, v := (x-b[3])/b[4], (x-b[6])/b[7]
		a, c := math.Exp(-u*u), math.Exp(-v*v)
		if g != nil {
			copy(g, []float64{e, -b[0] * x * e,
				a, 2 * b[2] * a * u / b[4], 2 * b[2] * a * u * u / b[4],
				c, 2 * b[5] * c * v / b[7], 2 * b[5] * c * v * v / b[7]})
		}
		return b[0]*e + b[2]*a + b[5]*c
	},
	"Lanczos3": func(x float64, b, g []float64) float64 {
		sum := 0.0
		for k := 0; k < 6; k += 2 {
			e := math.Exp(-b[k+1] * x)
			sum += b[k] * e
			if g != nil {
				g[k], g[k+1] = e, -b[k]*x*e
			}
		}
		return sum
	},
	"MGH09": func(x float64, b, g []float64) float64 {
		n, d := x*x+x*b[1], x*x+x*b[2]+b[3]
		if g != nil {
			copy(g, []float64{n / d, b[0] * x / d, -b[0] * n * x / (d * d), -b[0] * n / (d * d)})
		}
		return b[0] * n / d
	},
	"MGH17": func(x float64, b, g []float64) float64 {
		e, f := math.Exp(-x*b[3]), math.Exp(-x*b[4])
		if g != nil {
			copy(g, []float64{1, e, f, -b[1] * x * e, -b[2] * x * f})
		}
		return b[0] + b[1]*e + b[2]*f
	},
	"ENSO": func(x float64, b, g []float64) float64 {
		s, c := math.Sincos(2 * math.Pi * x / 12)
		s4, c4 := math.Sincos(2 * math.Pi * x / b[3])
		s7, c7 := math.Sincos(2 * math.Pi * x / b[6])
		if g != nil {
			w4, w7 := 2*math.Pi*x/(b[3]*b[3]), 2*math.Pi*x/(b[6]*b[6])
			copy(g, []float64{1, c, s, w4 * (b[4]*s4 - b[5]*c4), c4, s4, w7 * (b[7]*s7 - b[8]*c7), c7, s7})
		}
		return b[0] + b[1]*c + b[2]*s + b[4]*c4 + b[5]*s4 + b[7]*c7 + b[8]*s7
	},
	"Rat43": func(x float64, b, g []float64) float64 {
		e := math.Exp(b[1] - b[2]*x)
		v := math.Pow(1+e, -1/b[3])
		if g != nil {
			w := -b[0] * v / b[3] * e / (1 + e)
			copy(g, []float64{v, w, -x * w, b[0] * v * math.Log1p(e) / (b[3] * b[3])})
		}
		return b[0] * v
	},
	"Thurber": func(x float64, b, g []float64) float64 {
		n := b[0] + x*(b[1]+x*(b[2]+x*b[3]))
		d := 1 + x*(b[4]+x*(b[5]+x*b[6]))
		if g != nil {
			q := n / (d * d)
			copy(g, []float64{1 / d, x / d, x * x / d, x * x * x / d, -q * x, -q * x * x, -q * x * x * x})
		}
		return n / d
	},
}

func saturating(x float64, b, g []float64) float64 {
	e := math.Exp(-b[1] * x)
	if g != nil {
		g[0], g[1] = 1-e, b[0]*x*e
	}
	return b[0] * (1 - e)
}

// digits is the number of correct significant digits, at most that of the
// eleven certified ones.
func digits(found, certified float64) float64 {
	if found == certified {
		return 11
	}
	return min(-math.Log10(math.Abs(found-certified)/math.Abs(certified)), 11)
}

// The certified values carry eleven digits. With slopes written by hand ten of
// parameters, standard deviations and sum of squares are found again, from
// either start; with differences, nine (most of them ten): their error, some
// 1e-13, is multiplied by the condition of Lanczos3.
func TestStatisticalReferenceProblems(t *testing.T) {
	require.Len(t, strdModels, 10)
	for name, f := range strdModels {
		p := readSTRD(t, name)
		for k, start := range p.starts {
			for _, byHand := range []bool{true, false} {
				c := Curve{X: p.x, Y: p.y, F: func(x float64, b []float64) float64 { return f(x, b, nil) }}
				least := 9.0
				if byHand {
					c.Slopes = func(x float64, b, g []float64) { f(x, b, g) }
					least = 10
				}
				res, err := c.Fit(start, nil)
				require.NoError(t, err)
				params, errors := 11.0, 11.0
				for j, se := range res.StandardErrors() {
					params = min(params, digits(res.Params[j], p.params[j]))
					errors = min(errors, digits(se, p.errors[j]))
				}
				rss := digits(res.ChiSquare, p.rss)
				t.Logf("%-8s start %d slopes by hand %-5v: digits of parameters %4.1f, errors %4.1f, sum of squares %4.1f; %d iterations, %d evaluations, %d searches, %v",
					name, k+1, byHand, params, errors, rss, res.Iterations, res.Evaluations, res.Searches, res.Status)
				require.True(t, res.Status.Converged(), "%s start %d: %v", name, k+1, res.Status)
				require.GreaterOrEqual(t, min(params, errors, rss), least, "%s start %d slopes by hand %v", name, k+1, byHand)
			}
		}
	}
}
