package models

import "fmt"

// Frames says in which frame each level is written.
//
// The frame of a level is reached from the first level along the drives in
// order, breadth first: upwards it gains the drive's running phase 2π∫ν dt,
// downwards it loses it. Levels that no drive reaches start a group of their
// own. A pair that closes a loop keeps what is left of its drive's phase.
type Frames struct {
	Counts [][]int // Counts[a][n]: how often the frame of level a carries the phase of drive n
	Group  []int   // first level of the group that level a belongs to
	Loops  []Loop
	loopOf map[[2]int]int // (drive, pair) → index of Loops
}

// Loop is a pair of a drive whose phase the frames do not absorb: it turns with
// δ = Δ_n − Σ_k Shift[k] Δ_k, Shift[k] = m_upper,k − m_lower,k.
type Loop struct {
	Drive, Pair int
	Shift       []int
}

// FindFrames walks the drives of m. A drive with a pair of equal levels is an
// error.
func FindFrames(m Model) (Frames, error) {
	f := Frames{Counts: make([][]int, m.Levels), Group: make([]int, m.Levels), loopOf: map[[2]int]int{}}
	for n, d := range m.Drives {
		for _, p := range d.Pairs {
			if p.From == p.To {
				return f, fmt.Errorf("drive %d connects a level with itself", n+1)
			}
		}
	}
	used := map[[2]int]bool{}
	for first := range m.Levels {
		if f.Counts[first] == nil {
			f.Counts[first] = make([]int, len(m.Drives))
			f.walk(m, first, used)
		}
	}
	for n, d := range m.Drives {
		if d.Lab != m.Drives[0].Lab {
			return f, fmt.Errorf("drives 1 and %d differ in whether they act as they are; either all drives do or none", n+1)
		}
		for j, p := range d.Pairs {
			shift, closes := f.difference(p), false
			for k, s := range shift {
				closes = closes || (k == n) != (s == 1) || (k != n && s != 0)
			}
			if closes && !d.Lab && !used[[2]int{n, j}] {
				f.loopOf[[2]int{n, j}] = len(f.Loops)
				f.Loops = append(f.Loops, Loop{Drive: n, Pair: j, Shift: shift})
			}
		}
	}
	return f, nil
}

func (f *Frames) walk(m Model, first int, used map[[2]int]bool) {
	f.Group[first] = first
	for queue := []int{first}; len(queue) > 0; queue = queue[1:] {
		a := queue[0]
		for n, d := range m.Drives {
			if d.Lab {
				continue // nothing turns with it
			}
			for j, p := range d.Pairs {
				b, gain := p.To, 1
				if p.To == a {
					b, gain = p.From, -1
				} else if p.From != a {
					continue
				}
				if f.Counts[b] != nil {
					continue
				}
				f.Counts[b] = append([]int(nil), f.Counts[a]...)
				f.Counts[b][n] += gain
				f.Group[b] = first
				used[[2]int{n, j}] = true
				queue = append(queue, b)
			}
		}
	}
}

func (f *Frames) difference(p Pair) []int {
	d := make([]int, len(f.Counts[p.To]))
	for k := range d {
		d[k] = f.Counts[p.To][k] - f.Counts[p.From][k]
	}
	return d
}

// Same reports whether two levels are written in the same frame.
func (f *Frames) Same(a, b int) bool {
	for k, m := range f.Counts[a] {
		if m != f.Counts[b][k] {
			return false
		}
	}
	return true
}

// SameStep reports whether the two pairs span equal differences of frames.
func (f *Frames) SameStep(p, q Pair) bool {
	dp, dq := f.difference(p), f.difference(q)
	for k := range dp {
		if dp[k] != dq[k] {
			return false
		}
	}
	return true
}

// InLoop reports whether the drive is part of a closed loop: it closes one, or
// the frame difference of a closing pair carries its phase.
func (f *Frames) InLoop(drive int) bool {
	for _, l := range f.Loops {
		if l.Drive == drive || l.Shift[drive] != 0 {
			return true
		}
	}
	return false
}
