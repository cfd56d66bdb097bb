package models

import (
	"math"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/lindblad"
)

// terms writes what depends on time. Every direction writes its slopes in the
// order in which direction −1 wrote the values.
type terms struct {
	l         *Layout
	dst       *lindblad.Stretch
	direction int
}

// add writes amplitude · pulse(t) · cos(θ_rotor + phase) on a piece.
func (t terms) add(piece int, amplitude, phase dual.Number, pulse *Pulse, rotor int) {
	if t.direction < 0 {
		term := lindblad.Term{Piece: piece, Amplitude: amplitude.Real, Phase: phase.Real, Rotor: rotor}
		if !pulse.constant() {
			term.Envelope = pulse.envelope(false)
		}
		t.dst.Terms = append(t.dst.Terms, term)
		return
	}
	slope := lindblad.TermSlope{Amplitude: amplitude.Emag, Phase: phase.Emag}
	if !pulse.constant() && pulse.turned() {
		slope.Envelope = pulse.envelope(true)
	}
	s := &t.dst.Slopes[t.direction]
	s.Terms = append(s.Terms, slope)
}

// turned reports whether the course moves along this direction.
func (p *Pulse) turned() bool {
	return p.Lasts.Emag != 0 || p.Centre.Emag != 0 || p.Width.Emag != 0 || p.Rise.Emag != 0 || p.Fall.Emag != 0
}

// couple writes x cos(θ + φ) and y sin(θ + φ) of a pair whose half Rabi
// frequency takes a course or whose phase turns.
func (t terms) couple(drive, pair, rotor int, half dual.Number, d *DriveSettings) {
	c := t.l.coupling[t.l.Model.Drives[drive].Pairs[pair]]
	quarter := dual.Number{Real: math.Pi / 2}
	t.add(c.x, half, d.Phase, d.Pulse, rotor)
	t.add(c.y, half, dual.Sub(d.Phase, quarter), d.Pulse, rotor)
	if d.Quadrature != nil {
		t.add(c.x, half, dual.Add(d.Phase, quarter), d.Quadrature, rotor)
		t.add(c.y, half, d.Phase, d.Quadrature, rotor)
	}
}

// bare writes Ω cos(θ + φ) on a pair of a drive that acts as it is; its phase
// θ = 2π∫ν dt runs from the start of the sequence.
func (t terms) bare(drive, pair int, d *DriveSettings) {
	c := t.l.coupling[t.l.Model.Drives[drive].Pairs[pair]]
	omega := dual.Scale(2, coupled(d, pair, d.Rabi))
	t.add(c.x, omega, d.Phase, d.Pulse, drive)
	if d.Quadrature != nil {
		t.add(c.x, omega, dual.Add(d.Phase, dual.Number{Real: math.Pi / 2}), d.Quadrature, drive)
	}
}

// energies writes shaped shifts and chirps.
func (t terms) energies(s *Settings) {
	for i, shift := range t.l.Model.Shifts {
		v := &s.Shifts[i]
		if v.Pulse.constant() {
			continue
		}
		for j, a := range shift.Levels {
			t.add(t.l.energy[a], dual.Mul(twoPi, dual.Mul(v.Extra, v.Weights[j])), dual.Number{}, v.Pulse, -1)
		}
	}
	for n := range t.l.Model.Drives {
		d := &s.Drives[n]
		if !d.On || !d.Chirped {
			continue
		}
		course := line(s.Lasts)
		for a, counts := range t.l.Frames.Counts {
			if m := counts[n]; m != 0 {
				t.add(t.l.energy[a], dual.Scale(-2*math.Pi*float64(m), d.Chirp), dual.Number{}, course, -1)
			}
		}
	}
}
