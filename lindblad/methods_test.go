package lindblad

import (
	"context"
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

var background = context.Background()

// twoLevels is a driven, decaying two-level system: Rabi frequency, detuning,
// decay rate as coefficients of its pieces.
func twoLevels(t testing.TB) (*Layout, []float64) {
	pieces := []Piece{
		Hamiltonian(Operator{{0, 1, 0.5}, {1, 0, 0.5}}),
		Hamiltonian(Operator{{1, 1, -1}}),
		Jump(Operator{{0, 1, 1}}),
	}
	rho := []complex128{1, 0, 0, 0}
	l, err := NewLayout(2, pieces, NewSupport(2, rho), 0)
	require.NoError(t, err)
	x := make([]float64, l.Len())
	l.SetState(x, rho)
	return l, x
}

func end(t testing.TB, s *Solver, x []float64, stretches []Stretch, order []Node) []float64 {
	var out []float64
	require.NoError(t, s.Run(background, x, nil, stretches, order, Record{During: -1}, func(_ int, y []float64, _ [][]float64) error {
		out = append(out, y...)
		return nil
	}))
	return out
}

// The propagator of random generators against gonum's exponential (scaling and
// squaring with Padé approximants), over nine decades of ‖L‖t. Both lose some
// 1e-16·‖L‖t.
func TestPropagatorsAgainstMatrixExponential(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 1))
	for trial := range 120 {
		levels, pieces, _, st := wild(r, false)
		l, err := NewLayout(levels, pieces, nil, 0)
		require.NoError(t, err)
		n := l.Len()
		vals := make([]float64, len(l.col))
		l.generator(vals, st.Coef)
		var e exponential
		e.reset(l, 0)
		e.put(l, 0, vals, st.Lasts)
		q, _, size := e.run(l)
		if size > 1e5 {
			continue
		}
		a := mat.NewDense(n, n, nil)
		for i := range n {
			for k := l.start[i]; k < l.start[i+1]; k++ {
				a.Set(i, int(l.col[k]), vals[k]*st.Lasts)
			}
		}
		var want mat.Dense
		want.Exp(a)
		for i := range n {
			for j := range n {
				got := q.a[i*q.m+j]
				if n > smallest && (int32(j) < q.lo[i/4] || int32(j) >= q.hi[i/4]) {
					got = 0
				}
				if i == j {
					got++
				}
				assert.InDelta(t, want.At(i, j), got, 1e-13+3e-15*size, "trial %d size %g", trial, size)
			}
		}
	}
}

// Series in time, which large systems use, against propagators.
func TestSeriesAgainstPropagators(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 1))
	for trial := range 40 {
		levels, pieces, rho, st := wild(r, false)
		l, err := NewLayout(levels, pieces, NewSupport(levels, rho), 0)
		require.NoError(t, err)
		x := make([]float64, l.Len())
		l.SetState(x, rho)
		accuracy := math.Pow(10, -4-float64(trial%9))
		st.Lasts = math.Min(st.Lasts, 1)
		want := end(t, NewSolver(l, nil, Settings{}), x, []Stretch{st}, []Node{{}})
		var w shaped
		var stats Stats
		y := append([]float64(nil), x...)
		f := field{&st, nil, nil}
		require.NoError(t, w.run(background, l, &f, y, 0, st.Lasts, accuracy, &stats, ignore))
		for i := range y {
			assert.InDelta(t, want[i], y[i], accuracy+1e-13, "trial %d", trial)
		}
	}
}

// A promise about the true error: shaped and turning drives on random systems
// against the classical Runge–Kutta method of order four with Richardson's
// extrapolation, written out here; it is good to some 1e-11.
func TestAccuracyIsKept(t *testing.T) {
	r := rand.New(rand.NewPCG(10, 1))
	for trial := range 24 {
		levels, pieces, rho, st := wild(r, true)
		l, err := NewLayout(levels, pieces, NewSupport(levels, rho), 0)
		require.NoError(t, err)
		x := make([]float64, l.Len())
		l.SetState(x, rho)
		st.Lasts = math.Min(st.Lasts, 1)
		vals := make([]float64, len(l.col))
		coef := make([]float64, len(st.Coef))
		slope := func(y, x []float64, time float64) {
			copy(coef, st.Coef)
			for _, m := range st.Terms {
				f := m.Amplitude
				if m.Envelope != nil {
					f *= m.Envelope.At(time)
				}
				theta := m.Phase
				if m.Rotor >= 0 {
					theta += st.Rotors[m.Rotor] * time
				}
				coef[m.Piece] += f * math.Cos(theta)
			}
			l.generator(vals, coef)
			l.times(y, vals, x)
		}
		slope(make([]float64, l.n), x, 0)
		size := 0.0
		for _, v := range vals {
			size = math.Max(size, math.Abs(v))
		}
		if size > 100 {
			continue
		}
		rk := func(steps int) []float64 {
			y := append([]float64(nil), x...)
			n := len(y)
			k := [4][]float64{}
			for i := range k {
				k[i] = make([]float64, n)
			}
			z := make([]float64, n)
			h := st.Lasts / float64(steps)
			for i := range steps {
				time := float64(i) * h
				slope(k[0], y, time)
				for j, c := range []float64{0.5, 0.5, 1} {
					for q := range z {
						z[q] = y[q] + c*h*k[j][q]
					}
					slope(k[j+1], z, time+c*h)
				}
				for q := range y {
					y[q] += h / 6 * (k[0][q] + 2*k[1][q] + 2*k[2][q] + k[3][q])
				}
			}
			return y
		}
		steps := 400 + int(60*size*st.Lasts)
		a, b := rk(steps), rk(2*steps)
		for i := range b {
			b[i] += (b[i] - a[i]) / 15
		}
		for _, accuracy := range []float64{1e-2, 1e-4, 1e-6, 1e-8} {
			got := end(t, NewSolver(l, nil, Settings{Accuracy: accuracy}), x, []Stretch{st}, []Node{{}})
			for i := range got {
				assert.InDelta(t, b[i], got[i], accuracy+3e-11, "trial %d", trial)
			}
		}
	}
}

// A repeated group by powers of its map against the closed form: a resonant
// drive without decay turns by Ωt, and a million passes add up.
func TestManyRepeats(t *testing.T) {
	l, x := twoLevels(t)
	const omega, lasts = 0.37, 1.1
	stretches := []Stretch{{Lasts: lasts, Coef: []float64{omega, 0, 0}}}
	for _, repeat := range []int{1, 2, 3, 1000, 1000003} {
		v := NewSolver(l, nil, Settings{})
		got := end(t, v, x, stretches, []Node{{Group: []Node{{}}, Repeat: repeat}})
		angle := omega * lasts * float64(repeat)
		// rounding of the propagator's phase adds up: 1e-16 per pass
		assert.InDelta(t, math.Pow(math.Sin(angle/2), 2), l.Population(got, 1), 1e-14+2e-16*float64(repeat))
		assert.LessOrEqual(t, v.Stats().Applied, 60)
	}
}

// The period's propagators against plain integration of the same stretch.
func TestPeriodAgainstIntegration(t *testing.T) {
	l, x := twoLevels(t)
	st := Stretch{
		Lasts: 300, Coef: []float64{0, -2, 0.003}, Rotors: []float64{2, 3},
		Terms: []Term{{Piece: 0, Amplitude: 0.4, Phase: 0.3, Rotor: 0}, {Piece: 0, Amplitude: 0.2, Rotor: 1}, {Piece: 1, Amplitude: 0.1, Rotor: -1}},
	}
	for _, rec := range []Record{{During: -1}, {Samples: 301, During: -1}} {
		if rec.Samples > 0 {
			st.Lasts = 600 * math.Pi / 5 // the common period is 2π
		}
		var all [2][][]float64
		for k := range all {
			s := st
			if k == 1 { // an envelope that is one hides the period
				s.Terms = append([]Term(nil), st.Terms...)
				s.Terms[0].Envelope = constant(1)
			}
			v := NewSolver(l, nil, Settings{Accuracy: 1e-10})
			require.NoError(t, v.Run(background, x, nil, []Stretch{s}, []Node{{}}, rec, func(_ int, y []float64, _ [][]float64) error {
				all[k] = append(all[k], append([]float64(nil), y...))
				return nil
			}))
			if k == 0 {
				assert.Less(t, v.Stats().Steps, 60)
			}
		}
		require.Equal(t, len(all[0]), len(all[1]))
		for i := range all[0] {
			for j := range all[0][i] {
				assert.InDelta(t, all[1][i][j], all[0][i][j], 2e-10)
			}
		}
	}
}

type constant float64

func (c constant) At(float64) float64 { return float64(c) }
func (c constant) Taylor(_ float64, out []float64) {
	clear(out)
	out[0] = float64(c)
}

// A memory changes no bit, holds no more than it may, and is shared.
func TestMemory(t *testing.T) {
	l, x := twoLevels(t)
	small := NewMemory(4096)
	for i := range 300 {
		stretches := []Stretch{{Lasts: 1 + float64(i%40)/7, Coef: []float64{1, 0.3, 0.2}}}
		want := end(t, NewSolver(l, nil, Settings{}), x, stretches, []Node{{}})
		v := NewSolver(l, small, Settings{})
		got := end(t, v, x, stretches, []Node{{}})
		again := end(t, v, x, stretches, []Node{{}})
		assert.Equal(t, want, got)
		assert.Equal(t, want, again)
		assert.Equal(t, 2, v.Stats().Remembered+v.Stats().Exponentials)
		assert.GreaterOrEqual(t, v.Stats().Remembered, 1)
		assert.LessOrEqual(t, small.held, small.limit)
	}
}

// Solvers of several goroutines share a layout and a memory; the bits stay.
func TestWorkersShareAMemory(t *testing.T) {
	l, x := twoLevels(t)
	shared := NewMemory(1 << 14)
	run := func(v *Solver, i int) []float64 {
		return end(t, v, x, []Stretch{{Lasts: 1 + float64(i%17)/7, Coef: []float64{1, 0.3, 0.2}}}, []Node{{}})
	}
	var want [200][]float64
	for i := range want {
		want[i] = run(NewSolver(l, nil, Settings{}), i)
	}
	var group sync.WaitGroup
	for range 4 {
		group.Go(func() {
			v := NewSolver(l, shared, Settings{})
			for i := range want {
				assert.Equal(t, want[i], run(v, i))
			}
		})
	}
	group.Wait()
}

func TestSteadyStates(t *testing.T) {
	l, x := twoLevels(t)
	v := NewSolver(l, nil, Settings{})
	// Driven two-level atom: ρ_ee = (s/2)/(1 + s), s = (Ω²/2)/(Δ² + Γ²/4)
	// (Foot, Atomic Physics, 2005, eq. 7.68, from memory).
	const omega, delta, gamma = 1.3, 0.4, 0.8
	st := Stretch{Coef: []float64{omega, delta, gamma}}
	y, _, unique, err := v.Steady(background, x, []Stretch{st}, []Node{{}})
	require.NoError(t, err)
	assert.True(t, unique)
	s := omega * omega / 2 / (delta*delta + gamma*gamma/4)
	assert.InDelta(t, s/2/(1+s), l.Population(y, 1), 1e-15)

	// its slopes: those of the closed form, by Ω
	st.Slopes = []Slope{{Coef: []float64{1, 0, 0}}}
	_, dy, _, err := v.Steady(background, x, []Stretch{st}, []Node{{}})
	require.NoError(t, err)
	assert.InDelta(t, s/omega/(1+s)/(1+s), l.Population(dy[0], 1), 1e-15)
	assert.InDelta(t, 0, l.trace(dy[0]), 1e-15)

	// pulses with decay between, repeated without end: against many repeats
	pulses := []Stretch{{Lasts: 1.2, Coef: []float64{1, 0.2, 0}}, {Lasts: 0.7, Coef: []float64{0, 0.2, 0.5}}}
	order := []Node{{Stretch: 0}, {Stretch: 1}}
	y, _, unique, err = v.Steady(background, x, pulses, order)
	require.NoError(t, err)
	assert.True(t, unique)
	long := end(t, v, x, pulses, []Node{{Group: order, Repeat: 1000}})
	for i := range y {
		assert.InDelta(t, long[i], y[i], 1e-13)
	}

	// nothing decays: the average over all passes, from the start state
	y, _, unique, err = v.Steady(background, x, []Stretch{{Coef: []float64{1, 0, 0}}}, []Node{{}})
	require.NoError(t, err)
	assert.False(t, unique)
	assert.InDelta(t, 0.5, l.Population(y, 1), 1e-14)

	// two dark pairs: what starts in a pair stays there
	pieces := []Piece{Jump(Operator{{0, 1, 1}}), Jump(Operator{{2, 3, 1}})}
	rho := make(dense, 16)
	rho[5], rho[15] = 0.3, 0.7
	l4, err := NewLayout(4, pieces, nil, 0)
	require.NoError(t, err)
	z := make([]float64, l4.Len())
	l4.SetState(z, rho)
	y, _, unique, err = NewSolver(l4, nil, Settings{}).Steady(background, z, []Stretch{{Coef: []float64{1, 1e-6}}}, []Node{{}})
	require.NoError(t, err)
	assert.False(t, unique)
	assert.InDelta(t, 0.3, l4.Population(y, 0), 1e-12)
	assert.InDelta(t, 0.7, l4.Population(y, 2), 1e-12)
}

// Nothing is allocated per step or sample: a run of many steps allocates no
// more often than one of few.
func TestNoAllocationPerStep(t *testing.T) {
	l, x := twoLevels(t)
	v := NewSolver(l, nil, Settings{})
	emit := func(int, []float64, [][]float64) error { return nil }
	allocations := func(lasts float64, samples int, shaped bool) float64 {
		st := Stretch{Lasts: lasts, Coef: []float64{1, 0.2, 0.1}}
		if shaped {
			st.Terms = []Term{{Piece: 0, Amplitude: 1, Envelope: constant(1), Rotor: -1}}
		}
		stretches, order := []Stretch{st}, []Node{{}}
		return testing.AllocsPerRun(5, func() {
			require.NoError(t, v.Run(background, x, nil, stretches, order, Record{Samples: samples, During: -1}, emit))
		})
	}
	for _, shaped := range []bool{false, true} {
		assert.Equal(t, allocations(10, 11, shaped), allocations(1000, 2001, shaped))
	}
}

func TestWhatRunRefuses(t *testing.T) {
	l, x := twoLevels(t)
	good := Stretch{Lasts: 1, Coef: []float64{1, 0, 0}}
	emit := func(int, []float64, [][]float64) error { return nil }
	for text, change := range map[string]func(s *Stretch, order *[]Node, rec *Record){
		"2 coefficients for 3 pieces": func(s *Stretch, _ *[]Node, _ *Record) { s.Coef = s.Coef[:2] },
		"lasts -1":                    func(s *Stretch, _ *[]Node, _ *Record) { s.Lasts = -1 },
		"lasts NaN":                   func(s *Stretch, _ *[]Node, _ *Record) { s.Lasts = math.NaN() },
		"not a finite number":         func(s *Stretch, _ *[]Node, _ *Record) { s.Coef = []float64{math.Inf(1), 0, 0} },
		"acts on piece 7":             func(s *Stretch, _ *[]Node, _ *Record) { s.Terms = []Term{{Piece: 7, Rotor: -1}} },
		"turns with rotor 0":          func(s *Stretch, _ *[]Node, _ *Record) { s.Terms = []Term{{}} },
		"plays stretch 3":             func(_ *Stretch, o *[]Node, _ *Record) { *o = []Node{{Stretch: 3}} },
		"repeated -2 times":           func(_ *Stretch, o *[]Node, _ *Record) { *o = []Node{{Group: *o, Repeat: -2}} },
		"1 samples":                   func(_ *Stretch, _ *[]Node, r *Record) { r.Samples = 1 },
		"never plays":                 func(_ *Stretch, o *[]Node, r *Record) { *o = nil; r.Samples, r.During = 3, 0 },
		"must not decrease":           func(_ *Stretch, _ *[]Node, r *Record) { r.Times = []float64{1, 0.5} },
	} {
		st, order, rec := good, []Node{{}}, Record{During: -1}
		change(&st, &order, &rec)
		err := NewSolver(l, nil, Settings{}).Run(background, x, nil, []Stretch{st}, order, rec, emit)
		assert.ErrorContains(t, err, text)
	}
	done, cancel := context.WithCancel(background)
	cancel()
	st := Stretch{Lasts: 1e6, Coef: []float64{1, 0, 0}, Terms: []Term{{Envelope: constant(1), Amplitude: 1, Rotor: -1}}}
	assert.ErrorIs(t, NewSolver(l, nil, Settings{}).Run(done, x, nil, []Stretch{st}, []Node{{}}, Record{During: -1}, emit), context.Canceled)

	for text, p := range map[string]Piece{
		"outside the 2 levels": Jump(Operator{{0, 2, 1}}),
		"must be Hermitian":    Hamiltonian(Operator{{0, 1, 1}}),
		"two different levels": Damping(1, 1),
		"counter 0":            Count(Operator{{0, 0, 1}}, 0),
		"not a finite number":  Jump(Operator{{0, 1, complex(math.NaN(), 0)}}),
	} {
		_, err := NewLayout(2, []Piece{p}, nil, 0)
		assert.ErrorContains(t, err, text)
	}
}

// Rates of nine decades over a long time: the closed form of a decay and of a
// lossless beat, and no negative outputs.
func TestDisparateRates(t *testing.T) {
	pieces := []Piece{Jump(Operator{{0, 1, 1}}), Jump(Operator{{1, 2, 1}}), Damping(0, 1), Damping(1, 2), Damping(0, 2)}
	l, err := NewLayout(3, pieces, nil, 0)
	require.NoError(t, err)
	rho := dense{0, 0, 0, 0, 0, 0, 0, 0, 1}
	x := make([]float64, l.Len())
	l.SetState(x, rho)
	fast, slow, time := 1e9, 0.5, 2.0
	got := end(t, NewSolver(l, nil, Settings{}), x, []Stretch{{Lasts: time, Coef: []float64{fast, slow, 0, 1e6, 0}}}, []Node{{}})
	// populations of a chain of two decays
	assert.InDelta(t, math.Exp(-slow*time), l.Population(got, 2), 1e-12)
	assert.InDelta(t, slow/(fast-slow)*(math.Exp(-slow*time)-math.Exp(-fast*time)), l.Population(got, 1), 1e-13)
	assert.InDelta(t, 1, l.trace(got), 1e-15)
}

// Terms that do not change join the coefficients, slopes too: against the same
// terms hidden behind an envelope that is one, after a stretch that has turned
// the rotor.
func TestConstantTerms(t *testing.T) {
	l, x := twoLevels(t)
	var got [2][][]float64
	for k := range got {
		var e Envelope
		if k == 1 {
			e = constant(1)
		}
		first := Stretch{Lasts: 0.7, Coef: []float64{1, 0.3, 0.1}, Rotors: []float64{2}, Slopes: []Slope{{Rotors: []float64{1}}, {Lasts: 1}}}
		second := Stretch{
			Lasts: 1.3, Coef: []float64{0.2, 0.3, 0.1},
			Terms:  []Term{{Piece: 0, Amplitude: 1.5, Phase: 0.4, Envelope: e, Rotor: 0}, {Piece: 1, Amplitude: 0.5, Envelope: e, Rotor: -1}},
			Slopes: []Slope{{Coef: []float64{0, 1, 0}}, {Terms: []TermSlope{{Amplitude: 0.3, Phase: 0.2}, {}}}},
		}
		v := NewSolver(l, nil, Settings{Accuracy: 1e-12})
		require.NoError(t, v.Run(background, x, nil, []Stretch{first, second}, []Node{{Stretch: 0}, {Group: []Node{{Stretch: 1}}, Repeat: 3}}, Record{Samples: 7, During: -1}, func(_ int, y []float64, dy [][]float64) error {
			got[k] = append(got[k], append([]float64(nil), y...), append([]float64(nil), dy[0]...), append([]float64(nil), dy[1]...))
			return nil
		}))
		assert.Equal(t, k == 0, v.Stats().Steps == 0)
	}
	require.Equal(t, len(got[1]), len(got[0]))
	for i := range got[0] {
		for j := range got[0][i] {
			assert.InDelta(t, got[1][i][j], got[0][i][j], 1e-11)
		}
	}
}

// Slopes at zero: of a decay by its rate, of a turn by its frequency, where the
// propagator itself is the identity.
func TestSlopesAtZero(t *testing.T) {
	l, _ := twoLevels(t)
	x := make([]float64, l.Len())
	l.SetState(x, []complex128{0, 0, 0, 1})
	const lasts = 1.7
	st := Stretch{Lasts: lasts, Coef: []float64{0, 0, 0}, Slopes: []Slope{{Coef: []float64{0, 0, 1}}, {Coef: []float64{1, 0, 0}}}}
	require.NoError(t, NewSolver(l, nil, Settings{}).Run(background, x, nil, []Stretch{st}, []Node{{}}, Record{During: -1}, func(_ int, y []float64, dy [][]float64) error {
		assert.Equal(t, x, y)
		assert.InDelta(t, -lasts, l.Population(dy[0], 1), 1e-15)
		assert.InDelta(t, lasts, l.Population(dy[0], 0), 1e-15)
		assert.InDelta(t, lasts/2, abs(l.Coherence(dy[1], 0, 1)), 1e-15) // |ρ_ge| = |sin Ωt|/2
		return nil
	}))
}

// ramps is linear between its knots, one time unit apart.
type ramps []float64

func (r ramps) segment(t float64) int { return min(max(int(t), 0), len(r)-2) }

func (r ramps) At(t float64) float64 {
	i := r.segment(t)
	return r[i] + (r[i+1]-r[i])*(t-float64(i))
}

func (r ramps) Taylor(t float64, c []float64) {
	i := r.segment(t)
	clear(c)
	c[0] = r.At(t)
	if len(c) > 1 {
		c[1] = r[i+1] - r[i]
	}
}

func (r ramps) NextBreak(t float64) float64 {
	if next := math.Floor(t) + 1; next < float64(len(r)-1) {
		return next
	}
	return math.Inf(1)
}

// line is linear without a break.
type line struct{ from, to float64 }

func (l line) At(t float64) float64 { return l.from + (l.to-l.from)*t }
func (l line) Taylor(t float64, c []float64) {
	clear(c)
	c[0] = l.At(t)
	if len(c) > 1 {
		c[1] = l.to - l.from
	}
}

// An envelope with breaks against one stretch per smooth part, explicit steps
// and the two-point series (large detuning) alike.
func TestBreaks(t *testing.T) {
	l, x := twoLevels(t)
	knots := ramps{0, 3, 1, 1, -2, 4, 0}
	for _, detuning := range []float64{0.5, 300} {
		coef := []float64{0, detuning, 20}
		term := func(e Envelope) []Term { return []Term{{Piece: 0, Amplitude: 2, Envelope: e, Rotor: -1}} }
		v := NewSolver(l, nil, Settings{})
		got := end(t, v, x, []Stretch{{Lasts: 6, Coef: coef, Terms: term(knots)}}, []Node{{}})
		assert.Less(t, v.Stats().Rejected, 20) // a series from beyond a break costs some ten more
		var parts []Stretch
		var order []Node
		for i := range len(knots) - 1 {
			parts = append(parts, Stretch{Lasts: 1, Coef: coef, Terms: term(line{knots[i], knots[i+1]})})
			order = append(order, Node{Stretch: i})
		}
		want := end(t, NewSolver(l, nil, Settings{Accuracy: 1e-12}), x, parts, order)
		for i := range want {
			assert.InDelta(t, want[i], got[i], 1e-8)
		}
	}
}
