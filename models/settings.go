package models

import (
	"math"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/lindblad"
)

// Settings are the numbers of one stretch of time: SI units, ordinary
// frequencies. The slices are parallel to those of the Model.
type Settings struct {
	Lasts      dual.Number   // s
	Energies   []dual.Number // of the levels over h, Hz; used when drives act as they are
	Drives     []DriveSettings
	Decays     []DecaySettings
	Dephasings []WeightSettings
	Shifts     []WeightSettings
	Counting   bool // the counter of photons runs
}

// DriveSettings are the numbers of a drive.
type DriveSettings struct {
	On        bool
	Rabi      dual.Number   // Ω/2π of a pair whose element is one, Hz
	Detuning  dual.Number   // ν_drive − ν_transition, Hz
	Phase     dual.Number   // φ, rad
	Linewidth dual.Number   // Lorentzian full width of the source, Hz
	Elements  []dual.Number // one per pair: its Rabi frequency is element × Rabi
	// Pulse is the course of the Rabi frequency, nil: constant. Quadrature is
	// a second course a quarter of a cycle ahead, for waveforms with a phase.
	Pulse, Quadrature *Pulse
	Chirped           bool
	Chirp             dual.Number // when Chirped: total change of the frequency over the stretch, centred on Detuning, Hz
}

// DecaySettings are the numbers of a decay.
type DecaySettings struct {
	Rate    dual.Number   // Γ, 1/s
	Reverse dual.Number   // share of the rate that runs back, 0 to 1
	Shares  []dual.Number // one per pair: shares of the rate, or elements of the joint jump operator
}

// WeightSettings are the numbers of a dephasing (Size = 1/Tφ in 1/s) or of a
// shift (Size in Hz), with one weight per level of the Model's list.
type WeightSettings struct {
	Size    dual.Number
	Weights []dual.Number
	// A shift may also take a course: Extra × Pulse is added to Size.
	Extra dual.Number
	Pulse *Pulse
}

var (
	twoPi = dual.Number{Real: 2 * math.Pi}
	pi    = dual.Number{Real: math.Pi}
	one   = dual.Number{Real: 1}
)

// RateOfLifetime returns Γ = 1/τ.
func RateOfLifetime(lifetime dual.Number) dual.Number { return dual.Inv(lifetime) }

// RateOfLinewidth returns Γ = 2π × the full width of a decay's line in Hz.
func RateOfLinewidth(width dual.Number) dual.Number { return dual.Mul(twoPi, width) }

// DephasingOfLinewidth returns 1/Tφ = π × the full width of a line in Hz.
func DephasingOfLinewidth(width dual.Number) dual.Number { return dual.Mul(pi, width) }

// TurnRate returns the rate 2π × rabi × scale (rad/s) at which a square pulse
// gathers its area.
func TurnRate(rabi, scale float64) float64 { return 2 * math.Pi * rabi * scale }

// Fill writes the stretch that s describes into dst. Direction −1 writes the
// values, direction j ≥ 0 the slopes with respect to the j-th free dial from
// the dual parts; dst.Slopes must have room for it.
func (l *Layout) Fill(dst *lindblad.Stretch, s *Settings, direction int) {
	part := func(d dual.Number) float64 { return d.Real }
	coef := dst.Coef
	if direction >= 0 {
		part = func(d dual.Number) float64 { return d.Emag }
		coef = dst.Slopes[direction].Coef
		dst.Slopes[direction].Lasts = s.Lasts.Emag
		dst.Slopes[direction].Terms = dst.Slopes[direction].Terms[:0]
	} else {
		dst.Lasts = s.Lasts.Real
		dst.Terms = dst.Terms[:0]
	}
	dst.Ideal = false
	clear(coef)
	l.fillEnergies(s, part, coef)
	l.fillDecays(s, part, coef)
	l.fillDampings(s, part, coef)
	for n := range l.Model.Drives {
		d := &s.Drives[n]
		for j := range d.Elements {
			if d.On && !l.lab() && l.loop(n, j) < 0 && d.Pulse.constant() {
				l.couple(n, j, coupled(d, j, d.Rabi), d.Phase, part, coef)
			}
		}
	}
	t := terms{l, dst, direction}
	t.energies(s)
	for n := range l.Model.Drives {
		d := &s.Drives[n]
		for j := range d.Elements {
			switch rotor := l.loop(n, j); {
			case d.On && l.lab():
				t.bare(n, j, d)
			case d.On && (rotor >= 0 || !d.Pulse.constant()):
				t.couple(n, j, rotor, coupled(d, j, d.Rabi), d)
			}
		}
	}
	l.fillRotors(dst, s, direction)
}

// FillRotation writes the ideal rotation by area (rad) of one drive: the map
// exp(−i(area/2)(e^{−iφ}|e⟩⟨g| + h.c.)), in no time and with nothing else
// acting. The same rules as for Fill hold.
func (l *Layout) FillRotation(dst *lindblad.Stretch, s *Settings, drive int, area dual.Number, direction int) {
	part := func(d dual.Number) float64 { return d.Real }
	coef := dst.Coef
	dst.Ideal = true
	if direction >= 0 {
		part = func(d dual.Number) float64 { return d.Emag }
		coef = dst.Slopes[direction].Coef
		dst.Slopes[direction].Lasts = 0
		dst.Slopes[direction].Terms = dst.Slopes[direction].Terms[:0]
	} else {
		dst.Lasts = 0
		dst.Terms = dst.Terms[:0]
	}
	clear(coef)
	d := &s.Drives[drive]
	for j := range d.Elements {
		turns := dual.Scale(1/(2*math.Pi), area)
		if l.loop(drive, j) < 0 {
			l.couple(drive, j, coupled(d, j, turns), d.Phase, part, coef)
		} else {
			bare := DriveSettings{Phase: d.Phase}
			terms{l, dst, direction}.couple(drive, j, l.loop(drive, j), coupled(d, j, turns), &bare)
		}
	}
	l.fillRotors(dst, s, direction)
}

// coupled is half the angular Rabi frequency of a pair.
func coupled(d *DriveSettings, j int, rabi dual.Number) dual.Number {
	return dual.Mul(pi, dual.Mul(rabi, d.Elements[j]))
}

func (l *Layout) loop(drive, pair int) int {
	if i, closes := l.Frames.loopOf[[2]int{drive, pair}]; closes {
		return i
	}
	return -1
}

// couple adds h|e⟩⟨g| + h.c., h = (Ω/2)e^{−iφ}.
func (l *Layout) couple(drive, pair int, half, phase dual.Number, part func(dual.Number) float64, coef []float64) {
	c := l.coupling[l.Model.Drives[drive].Pairs[pair]]
	coef[c.x] += part(dual.Mul(half, dual.Cos(phase)))
	coef[c.y] += part(dual.Mul(half, dual.Sin(phase)))
}

func (l *Layout) fillEnergies(s *Settings, part func(dual.Number) float64, coef []float64) {
	for a, piece := range l.energy {
		if piece < 0 {
			continue
		}
		if l.lab() {
			coef[piece] += 2 * math.Pi * part(s.Energies[a])
		}
		for n, m := range l.Frames.Counts[a] {
			if m != 0 {
				coef[piece] -= 2 * math.Pi * float64(m) * part(s.Drives[n].Detuning)
			}
		}
	}
	for i, shift := range l.Model.Shifts {
		for j, a := range shift.Levels {
			coef[l.energy[a]] += 2 * math.Pi * part(dual.Mul(s.Shifts[i].Size, s.Shifts[i].Weights[j]))
		}
	}
}

func (l *Layout) fillDecays(s *Settings, part func(dual.Number) float64, coef []float64) {
	for i, d := range l.Model.Decays {
		v := &s.Decays[i]
		for j, p := range d.Pairs {
			switch {
			case d.Joint:
				coef[l.jump[p]] += part(v.joint(j, j))
				for k := 0; k < j; k++ {
					coef[l.cross[[2]Pair{d.Pairs[k], p}]] += part(v.joint(k, j))
				}
			default:
				coef[l.jump[p]] += part(v.down(j))
				if d.Reversible {
					coef[l.jump[Pair{p.To, p.From}]] += part(dual.Mul(v.Rate, v.Reverse))
				}
			}
		}
	}
	if !s.Counting {
		return
	}
	for _, i := range l.Model.Counted {
		l.eachCounted(i, func(upper Pair, j, k int) {
			coef[l.count[upper]] += part(s.Decays[i].counted(l.Model.Decays[i].Joint, j, k))
		})
	}
}

// joint is Γ c_j c_k.
func (v *DecaySettings) joint(j, k int) dual.Number {
	return dual.Mul(v.Rate, dual.Mul(v.Shares[j], v.Shares[k]))
}

// down is the downward rate of one pair, Γ(1 − reverse)·share.
func (v *DecaySettings) down(j int) dual.Number {
	return dual.Mul(v.Rate, dual.Mul(dual.Sub(one, v.Reverse), v.Shares[j]))
}

// counted is the coefficient of a term of C†C; off the diagonal it stands for
// both orders of the pair.
func (v *DecaySettings) counted(joint bool, j, k int) dual.Number {
	if joint {
		return v.joint(j, k)
	}
	return v.down(j)
}

// Emission is the rate of photons Σ Tr(C†Cρ) (1/s) that leave by the counted
// decays, from populations ρ_aa and real parts Re ρ_ab.
func (l *Layout) Emission(s *Settings, density func(a, b int) dual.Number) dual.Number {
	var sum dual.Number
	for _, i := range l.Model.Counted {
		l.eachCounted(i, func(upper Pair, j, k int) {
			term := dual.Mul(s.Decays[i].counted(l.Model.Decays[i].Joint, j, k), density(upper.From, upper.To))
			if upper.From != upper.To {
				term = dual.Scale(2, term)
			}
			sum = dual.Add(sum, term)
		})
	}
	return sum
}

func (l *Layout) fillDampings(s *Settings, part func(dual.Number) float64, coef []float64) {
	for _, d := range l.damping {
		var rate dual.Number
		for i, deph := range l.Model.Dephasings {
			v := &s.Dephasings[i]
			var w dual.Number // w_a − w_b
			for j, level := range deph.Levels {
				switch level {
				case d.a:
					w = dual.Add(w, v.Weights[j])
				case d.b:
					w = dual.Sub(w, v.Weights[j])
				}
			}
			rate = dual.Add(rate, dual.Mul(v.Size, dual.Mul(w, w)))
		}
		for n := range l.Model.Drives {
			if m := l.Frames.Counts[d.a][n] - l.Frames.Counts[d.b][n]; m != 0 {
				rate = dual.Add(rate, dual.Scale(math.Pi*float64(m*m), s.Drives[n].Linewidth))
			}
		}
		coef[d.piece] += part(rate)
	}
}

// fillRotors writes how fast the phases turn that the frames leave over:
// dθ/dt = 2πδ.
func (l *Layout) fillRotors(dst *lindblad.Stretch, s *Settings, direction int) {
	if l.lab() {
		for n, d := range l.Model.Drives {
			nu := dual.Add(s.Drives[n].Detuning, dual.Sub(s.Energies[d.Pairs[0].To], s.Energies[d.Pairs[0].From]))
			if direction >= 0 {
				dst.Slopes[direction].Rotors[n] = 2 * math.Pi * nu.Emag
			} else {
				dst.Rotors[n] = 2 * math.Pi * nu.Real
			}
		}
		return
	}
	for i, loop := range l.Frames.Loops {
		delta := s.Drives[loop.Drive].Detuning
		size := math.Abs(delta.Real)
		for k, m := range loop.Shift {
			if m != 0 {
				delta = dual.Sub(delta, dual.Scale(float64(m), s.Drives[k].Detuning))
				size += math.Abs(float64(m) * s.Drives[k].Detuning.Real)
			}
		}
		if math.Abs(delta.Real) <= 1e-15*size {
			delta.Real = 0 // what rounding leaves of decimal numbers that cancel
		}
		if direction >= 0 {
			dst.Slopes[direction].Rotors[i] = 2 * math.Pi * delta.Emag
		} else {
			dst.Rotors[i] = 2 * math.Pi * delta.Real
		}
	}
}

// NewStretch returns a stretch with room for this layout and the given number
// of directions.
func (l *Layout) NewStretch(directions int) lindblad.Stretch {
	st := lindblad.Stretch{
		Coef:   make([]float64, len(l.Pieces)),
		Rotors: make([]float64, l.rotors()),
		Slopes: make([]lindblad.Slope, directions),
	}
	for j := range st.Slopes {
		st.Slopes[j] = lindblad.Slope{
			Coef:   make([]float64, len(l.Pieces)),
			Rotors: make([]float64, l.rotors()),
		}
	}
	return st
}
