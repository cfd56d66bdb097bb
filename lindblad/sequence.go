package lindblad

import (
	"fmt"
	"math"
)

// Stretch is a time during which the coefficients of the pieces keep one form.
type Stretch struct {
	Lasts  float64   // duration, ≥ 0
	Ideal  bool      // a rotation in no time: the map is exp(L), terms taken where their rotors stand; Lasts is ignored
	Coef   []float64 // one per piece: the constant part
	Terms  []Term    // what depends on time
	Rotors []float64 // angular frequencies of the running phases; nil: they stand still
	Slopes []Slope   // one per direction; empty: nothing depends on the directions
}

// Term adds Amplitude · Envelope(t) · cos(θ_Rotor(t) + Phase) to the
// coefficient of a piece, t from the stretch's start.
type Term struct {
	Piece            int
	Amplitude, Phase float64
	Envelope         Envelope // nil: 1
	Rotor            int      // −1: none; the factor is then cos(Phase)
}

// Envelope is a function of time since the start of its stretch.
type Envelope interface{ At(t float64) float64 }

// Series is an Envelope with its Taylor series, which the fast methods need;
// without it a stretch is carried by Runge–Kutta steps.
type Series interface {
	Envelope
	Taylor(t float64, c []float64) // c[k] = f⁽ᵏ⁾(t)/k!
}

// Broken is an Envelope that is smooth only between breaks (ends of a rise,
// knots of a table). At a break, Taylor gives the series to the right of it.
type Broken interface {
	NextBreak(t float64) float64 // the first break after t; +Inf when there is none
}

// Slope is the derivative of a Stretch along one direction; nil slices mean zero.
type Slope struct {
	Lasts  float64
	Coef   []float64
	Rotors []float64
	Terms  []TermSlope // parallel to the stretch's Terms
}

// TermSlope is the derivative of a Term. Envelope is the derivative of the
// envelope at fixed time; nil: it does not depend.
type TermSlope struct {
	Amplitude, Phase float64
	Envelope         Envelope
}

// Node is a stretch (Group nil) or a group that is played Repeat times, 0 times too.
type Node struct {
	Stretch int
	Group   []Node
	Repeat  int
}

// Record says which states are handed out.
type Record struct {
	Samples int // 0: the end of the sequence only; n > 1: n equally spaced times from 0 to the end
	During  int // −1: samples span the whole sequence; else the index of a stretch: its first run
	// Times, when not nil, are the recorded times (s, not decreasing, within the
	// record) in place of equally spaced ones; Samples is then ignored.
	Times []float64
}

func (l *Layout) checkStretch(i int, s *Stretch, rotors, directions int) error {
	fail := func(format string, a ...any) error {
		return fmt.Errorf("lindblad: stretch %d: %s", i, fmt.Sprintf(format, a...))
	}
	if len(s.Coef) != len(l.pieces) {
		return fail("%d coefficients for %d pieces", len(s.Coef), len(l.pieces))
	}
	if !allFinite(s.Coef) || !allFinite(s.Rotors) {
		return fail("a coefficient is not a finite number")
	}
	if !s.Ideal && (s.Lasts < 0 || !finite(s.Lasts)) {
		return fail("lasts %g; a finite time of 0 or more is wanted", s.Lasts)
	}
	if s.Rotors != nil && len(s.Rotors) != rotors {
		return fail("%d rotors, another stretch has %d", len(s.Rotors), rotors)
	}
	for j, t := range s.Terms {
		if s.Ideal && t.Envelope != nil {
			return fail("a rotation in no time cannot have an envelope")
		}
		if t.Piece < 0 || t.Piece >= len(l.pieces) {
			return fail("term %d acts on piece %d of %d", j, t.Piece, len(l.pieces))
		}
		if t.Rotor < -1 || t.Rotor >= rotors {
			return fail("term %d turns with rotor %d of %d", j, t.Rotor, rotors)
		}
		if !finite(t.Amplitude) || !finite(t.Phase) {
			return fail("term %d is not a finite number", j)
		}
	}
	if len(s.Slopes) > directions {
		return fail("%d slopes for %d directions", len(s.Slopes), directions)
	}
	for j, d := range s.Slopes {
		if d.Coef != nil && len(d.Coef) != len(l.pieces) || d.Rotors != nil && len(d.Rotors) != rotors || d.Terms != nil && len(d.Terms) != len(s.Terms) {
			return fail("slope %d does not have the stretch's shape", j)
		}
		if !allFinite(d.Coef) || !allFinite(d.Rotors) || !finite(d.Lasts) {
			return fail("slope %d is not finite", j)
		}
	}
	return nil
}

func allFinite(x []float64) bool {
	var s float64
	for _, v := range x {
		s += v * 0
	}
	return s == 0 && !math.IsNaN(s)
}

// checkNodes tells what is wrong with an order.
func checkNodes(order []Node, stretches int) error {
	for _, n := range order {
		switch {
		case n.Group == nil && (n.Stretch < 0 || n.Stretch >= stretches):
			return fmt.Errorf("lindblad: the order plays stretch %d of %d", n.Stretch, stretches)
		case n.Group != nil && n.Repeat < 0:
			return fmt.Errorf("lindblad: a group is repeated %d times", n.Repeat)
		}
		if err := checkNodes(n.Group, stretches); err != nil {
			return err
		}
	}
	return nil
}
