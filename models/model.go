package models

import (
	"fmt"

	"rhotrace/lindblad"
)

// Model is what a laboratory has, without numbers: the levels and what
// connects, empties or moves them. Levels are numbered from 0.
type Model struct {
	Levels     int
	Drives     []Drive
	Decays     []Decay
	Dephasings []Weighted
	Shifts     []Weighted
	Counted    []int // decays whose photons are collected, as indices of Decays; they share counter 0
}

// Pair names two levels: lower and upper of a drive, from and to of a decay.
type Pair struct{ From, To int }

// Drive is a light field on one or several pairs (From is the lower level).
// All pairs share its frame, phase and linewidth.
//
// With Lab the field acts as it is, without rotating-wave approximation:
// H/ħ gains Ω cos(2πνt + φ)(|e⟩⟨g| + h.c.), ν = E_e − E_g + detuning of the
// first pair, and the levels keep their energies. Then all drives must be so.
type Drive struct {
	Pairs []Pair
	Lab   bool
}

// Decay is a channel from an upper level to one or several lower ones.
//
// With Joint the pairs form one jump operator √Γ Σ c|to⟩⟨from|, otherwise each
// pair is a jump of its own with a share of the rate. Reversible decays (one
// pair) also run back.
type Decay struct {
	Pairs      []Pair
	Joint      bool
	Reversible bool
}

// Weighted lists the levels that a dephasing or a shift moves.
type Weighted struct{ Levels []int }

// Layout is a model with its pieces laid out and its frames found.
type Layout struct {
	Model  Model
	Frames Frames
	Pieces []lindblad.Piece

	energy   []int             // piece of |a⟩⟨a|, −1 where nothing moves the level
	coupling map[Pair]coupling // lower:upper
	jump     map[Pair]int      // from:to
	cross    map[[2]Pair]int   // two pairs of one joint decay
	count    map[Pair]int      // pairs (from_i, from_j) counted
	damping  []dampingPiece    // coherences that something dephases
}

// coupling holds the pieces |e⟩⟨g| + |g⟩⟨e| and −i|e⟩⟨g| + i|g⟩⟨e|.
type coupling struct{ x, y int }

type dampingPiece struct{ a, b, piece int }

// NewLayout finds the frames of the levels and lays out every piece of the
// generator that some setting could use.
func NewLayout(m Model) (*Layout, error) {
	frames, err := FindFrames(m)
	if err != nil {
		return nil, err
	}
	l := &Layout{
		Model: m, Frames: frames,
		energy:   make([]int, m.Levels),
		coupling: map[Pair]coupling{},
		jump:     map[Pair]int{},
		cross:    map[[2]Pair]int{},
		count:    map[Pair]int{},
	}
	l.layEnergies()
	l.layCouplings()
	if err := l.layDecays(); err != nil {
		return nil, err
	}
	l.layDampings()
	return l, nil
}

// lab reports whether the drives act as they are.
func (l *Layout) lab() bool { return len(l.Model.Drives) > 0 && l.Model.Drives[0].Lab }

// rotors is the number of running phases: one for each loop, or for each drive
// that acts as it is.
func (l *Layout) rotors() int {
	if l.lab() {
		return len(l.Model.Drives)
	}
	return len(l.Frames.Loops)
}

func (l *Layout) add(p lindblad.Piece) int {
	l.Pieces = append(l.Pieces, p)
	return len(l.Pieces) - 1
}

func (l *Layout) layEnergies() {
	moved := make([]bool, l.Model.Levels)
	for a := range moved {
		for _, m := range l.Frames.Counts[a] {
			moved[a] = moved[a] || m != 0
		}
		moved[a] = moved[a] || l.lab()
	}
	for _, s := range l.Model.Shifts {
		for _, a := range s.Levels {
			moved[a] = true
		}
	}
	for a, yes := range moved {
		l.energy[a] = -1
		if yes {
			l.energy[a] = l.add(lindblad.Hamiltonian(lindblad.Operator{{Row: a, Col: a, Value: 1}}))
		}
	}
}

func (l *Layout) layCouplings() {
	for _, d := range l.Model.Drives {
		for _, p := range d.Pairs {
			if _, there := l.coupling[p]; there {
				continue
			}
			g, e := p.From, p.To
			l.coupling[p] = coupling{
				x: l.add(lindblad.Hamiltonian(lindblad.Operator{{Row: e, Col: g, Value: 1}, {Row: g, Col: e, Value: 1}})),
				y: l.add(lindblad.Hamiltonian(lindblad.Operator{{Row: e, Col: g, Value: -1i}, {Row: g, Col: e, Value: 1i}})),
			}
		}
	}
}

func lowering(p Pair) lindblad.Operator {
	return lindblad.Operator{{Row: p.To, Col: p.From, Value: 1}}
}

func (l *Layout) layDecays() error {
	single := func(p Pair) {
		if _, there := l.jump[p]; !there {
			l.jump[p] = l.add(lindblad.Jump(lowering(p)))
		}
	}
	for i, d := range l.Model.Decays {
		for j, p := range d.Pairs {
			if d.Joint && !l.Frames.SameStep(d.Pairs[0], p) {
				return fmt.Errorf("decay %d: pairs 1 and %d turn at different frequencies in the frame of the drives, so they cannot form one jump operator; give each pair a decay of its own", i+1, j+1)
			}
			single(p)
			if d.Reversible {
				single(Pair{From: p.To, To: p.From})
			}
			for k := 0; d.Joint && k < j; k++ {
				key := [2]Pair{d.Pairs[k], p}
				if _, there := l.cross[key]; !there {
					l.cross[key] = l.add(lindblad.CrossJump(lowering(key[0]), lowering(key[1])))
				}
			}
		}
	}
	for _, i := range l.Model.Counted {
		l.eachCounted(i, func(p Pair, _, _ int) {
			if _, there := l.count[p]; there {
				return
			}
			o := lindblad.Operator{{Row: p.From, Col: p.To, Value: 1}}
			if p.From != p.To {
				o = lindblad.Operator{{Row: p.From, Col: p.To, Value: 1}, {Row: p.To, Col: p.From, Value: 1}}
			}
			l.count[p] = l.add(lindblad.Count(o, 0))
		})
	}
	return nil
}

// eachCounted visits the terms of C†C of a decay: the pair of upper levels
// (equal for a population) with the indices of the two pairs of the decay.
func (l *Layout) eachCounted(decay int, visit func(upper Pair, j, k int)) {
	d := l.Model.Decays[decay]
	for j, p := range d.Pairs {
		visit(Pair{p.From, p.From}, j, j)
		for k := 0; d.Joint && k < j; k++ {
			if q := d.Pairs[k]; q.To == p.To {
				visit(Pair{q.From, p.From}, k, j)
			}
		}
	}
}

func (l *Layout) layDampings() {
	n := l.Model.Levels
	moved := make([]bool, n)
	for _, d := range l.Model.Dephasings {
		for _, a := range d.Levels {
			moved[a] = true
		}
	}
	for a := range n {
		for b := a + 1; b < n; b++ {
			if moved[a] || moved[b] || !l.Frames.Same(a, b) {
				l.damping = append(l.damping, dampingPiece{a, b, l.add(lindblad.Damping(a, b))})
			}
		}
	}
}

// Active returns the pieces with those of drives that are never on set to
// zero, so that the levels behind them are not counted as reachable.
func (l *Layout) Active(on []bool) []lindblad.Piece {
	pieces := append([]lindblad.Piece(nil), l.Pieces...)
	used := map[Pair]bool{}
	for n, d := range l.Model.Drives {
		for _, p := range d.Pairs {
			used[p] = used[p] || on[n]
		}
	}
	for p, c := range l.coupling {
		if !used[p] {
			pieces[c.x], pieces[c.y] = lindblad.Piece{}, lindblad.Piece{}
		}
	}
	return pieces
}
