package lindblad

import "fmt"

// Entry is one element of a sparse operator.
type Entry struct {
	Row, Col int
	Value    complex128
}

// Operator is a sparse N×N matrix; elements given twice add up.
type Operator []Entry

// Piece is one fixed real matrix L_k of the generator: dx/dt = Σ_k c_k(t) L_k x.
// The zero Piece is the zero matrix. A Piece refers to the operators that it
// was made from; do not change them afterwards.
type Piece struct {
	kind  kind
	op    Operator
	other Operator
	ops   []Operator
	a, b  int // the pair of a damping; a is the number of a counter
}

type kind uint8

const (
	nothing kind = iota
	hamiltonian
	jump
	jumps
	crossJump
	damping
	count
)

// Hamiltonian is −i[h, ρ]. h is in rad per unit of time and Hermitian; when it
// is not, NewLayout says so.
func Hamiltonian(h Operator) Piece { return Piece{kind: hamiltonian, op: h} }

// Jump is cρc† − ½{c†c, ρ}. The rate is c's squared size or the coefficient.
func Jump(c Operator) Piece { return Piece{kind: jump, op: c} }

// Jumps is Σ_q of Jump(c_q) as one piece, so that elements of Σ c†c that cancel
// leave no entry behind.
func Jumps(c ...Operator) Piece { return Piece{kind: jumps, ops: c} }

// CrossJump is aρb† + bρa† − ½{b†a + a†b, ρ}: what the jump a + b adds to the
// jumps a and b.
func CrossJump(a, b Operator) Piece { return Piece{kind: crossJump, op: a, other: b} }

// Damping is ρ_ab → −ρ_ab (and ρ_ba), the pure decay of one coherence, a ≠ b.
func Damping(a, b int) Piece { return Piece{kind: damping, a: a, b: b} }

// Count adds Tr(oρ), o Hermitian, to the rate of change of a counter, a real
// number beside the state. Counters are numbered from 0.
func Count(o Operator, counter int) Piece { return Piece{kind: count, op: o, a: counter} }

// check tells what is wrong with a piece.
func (p Piece) check(levels, counters int) error {
	inside := func(o Operator) error {
		for _, e := range o {
			if e.Row < 0 || e.Row >= levels || e.Col < 0 || e.Col >= levels {
				return fmt.Errorf("element (%d, %d) lies outside the %d levels", e.Row, e.Col, levels)
			}
			if !finite(real(e.Value)) || !finite(imag(e.Value)) {
				return fmt.Errorf("element (%d, %d) is not a finite number", e.Row, e.Col)
			}
		}
		return nil
	}
	if err := inside(p.op); err != nil {
		return err
	}
	if err := inside(p.other); err != nil {
		return err
	}
	for _, o := range p.ops {
		if err := inside(o); err != nil {
			return err
		}
	}
	switch p.kind {
	case damping:
		if p.a < 0 || p.a >= levels || p.b < 0 || p.b >= levels || p.a == p.b {
			return fmt.Errorf("damping of the pair (%d, %d): two different levels of %d are wanted", p.a, p.b, levels)
		}
	case count:
		if p.a < 0 || p.a >= counters {
			return fmt.Errorf("counter %d does not exist, there are %d", p.a, counters)
		}
	}
	return nil
}

func finite(x float64) bool { return x-x == 0 }
