package lindblad

import "math"

// A term without an envelope whose rotor stands still is constant: it joins the
// coefficients when its stretch begins, at the phase the rotor has by then. A
// stretch with no other terms is a constant one.

// foldable tells whether all terms of a stretch are constant along every
// direction. In a rotation in no time rotors cannot turn.
func (st *Stretch) foldable() bool {
	for i := range st.Terms {
		t := &st.Terms[i]
		if t.Envelope != nil {
			return false
		}
		if st.Ideal {
			continue
		}
		for j := range st.Slopes {
			d := &st.Slopes[j]
			if d.Terms != nil && d.Terms[i].Envelope != nil || t.Rotor >= 0 && d.Rotors != nil && d.Rotors[t.Rotor] != 0 {
				return false
			}
		}
		if t.Rotor >= 0 && st.Rotors != nil && st.Rotors[t.Rotor] != 0 {
			return false
		}
	}
	return len(st.Terms) > 0
}

// unfold prepares the run's own copy of the stretches.
func (s *Solver) unfold(given []Stretch) {
	s.given = given
	s.stretches = append(s.stretches[:0], given...)
	s.folds = sized(s.folds, len(given))
	for i := range given {
		s.folds[i] = given[i].foldable()
		if !s.folds[i] {
			continue
		}
		st := &s.stretches[i]
		st.Terms = nil
		st.Coef = make([]float64, len(s.l.pieces))
		st.Slopes = append([]Slope(nil), st.Slopes...)
		for j := range s.k { // a rotor's phase may depend on any direction
			if j >= len(st.Slopes) {
				st.Slopes = append(st.Slopes, Slope{})
			}
			st.Slopes[j].Terms = nil
			st.Slopes[j].Coef = make([]float64, len(s.l.pieces))
		}
		s.fold(i)
	}
}

// fold sets the coefficients of stretch i for the phases of this moment.
func (s *Solver) fold(i int) {
	if !s.folds[i] {
		return
	}
	given, st := &s.given[i], &s.stretches[i]
	copy(st.Coef, given.Coef)
	for j := range st.Slopes {
		clear(st.Slopes[j].Coef)
		if j < len(given.Slopes) {
			copy(st.Slopes[j].Coef, given.Slopes[j].Coef)
		}
	}
	for m := range given.Terms {
		t := &given.Terms[m]
		theta := t.Phase
		if t.Rotor >= 0 {
			theta += s.theta[t.Rotor]
		}
		sin, cos := math.Sincos(theta)
		st.Coef[t.Piece] += t.Amplitude * cos
		for j := range st.Slopes {
			var d TermSlope
			if j < len(given.Slopes) && given.Slopes[j].Terms != nil {
				d = given.Slopes[j].Terms[m]
			}
			phase := d.Phase
			if t.Rotor >= 0 {
				phase += s.dtheta[j][t.Rotor]
			}
			st.Slopes[j].Coef[t.Piece] += d.Amplitude*cos - t.Amplitude*sin*phase
		}
	}
	s.slots[i].used, s.slots[i].next = 0, 0
}
