package experiment

import (
	"fmt"
	"strings"

	"rhotrace/models"
)

// model is what the laboratory has, without numbers.
func (s *shape) model() models.Model {
	m := models.Model{Levels: len(s.levels)}
	for _, d := range s.drives {
		m.Drives = append(m.Drives, models.Drive{Pairs: d.pairs, Lab: d.lab})
	}
	for _, d := range s.decays {
		m.Decays = append(m.Decays, models.Decay{Pairs: d.pairs, Joint: d.joint, Reversible: !d.joint && len(d.pairs) == 1})
	}
	for _, d := range s.dephasings {
		m.Dephasings = append(m.Dephasings, models.Weighted{Levels: d.levels})
	}
	for _, d := range s.shifts {
		m.Shifts = append(m.Shifts, models.Weighted{Levels: d.levels})
	}
	if s.readout != nil {
		m.Counted = s.readout.counted
	}
	return m
}

// checkModel lays the model out once to find what does not fit together.
func (r *reader) checkModel() {
	s := r.e.shape
	for _, d := range s.decays {
		if !d.joint {
			continue
		}
		frames, err := models.FindFrames(s.model())
		if err != nil {
			continue
		}
		for _, p := range d.pairs[1:] {
			if !frames.SameStep(d.pairs[0], p) {
				r.fail(s.root.at(joinKey("decay", d.name, "pairs")), joinKey("decay", d.name, "pairs"),
					"%s and %s turn at different frequencies in the frame of the drives, so they cannot form one jump operator; give each a decay of its own",
					s.pairName(d.pairs[0]), s.pairName(p))
				return
			}
		}
	}
	if r.checkLab(); r.err() != nil {
		return
	}
	layout, err := models.NewLayout(s.model())
	if err != nil {
		r.fail(nil, "", "%v", err)
		return
	}
	for i, d := range s.drives {
		if d.linewidth != none && layout.Frames.InLoop(i) {
			r.fail(s.nodes[d.linewidth], s.dials[d.linewidth].Path,
				"is on a drive that is part of a closed loop, where the phase of one source cannot be told from the others'; use a dephasing of the level between two beams of one laser, or a noise on the detuning")
		}
	}
	for _, st := range s.steps {
		for _, d := range st.on {
			if f := st.chirpOf(d); f != none && layout.Frames.InLoop(d) {
				r.fail(s.nodes[f], s.dials[f].Path, "is on a drive that is part of a closed loop, where a chirp is not possible yet; chirp a drive outside loops")
			}
		}
	}
	r.warnIdleScans()
	r.warnLoops(&layout.Frames)
}

func (s *shape) pairName(p models.Pair) string { return s.levels[p.From] + ":" + s.levels[p.To] }

// warnLoops tells that the frame in which a coherence is given depends on the
// order of the drives when they close a loop.
func (r *reader) warnLoops(f *models.Frames) {
	if len(f.Loops) == 0 {
		return
	}
	s := r.e.shape
	inLoop := map[int]bool{}
	for i, d := range s.drives {
		for _, p := range d.pairs {
			if f.InLoop(i) {
				inLoop[p.From], inLoop[p.To] = true, true
			}
		}
	}
	read := append([][2]int(nil), s.record.coherences...)
	if s.readout != nil {
		read = append(read, s.readout.pairs...)
	}
	for _, p := range read {
		if inLoop[p[0]] && inLoop[p[1]] {
			r.warnings = append(r.warnings, fmt.Sprintf("coherence %s:%s is given in a frame that depends on the order of the drives, because they close a loop (`rhotrace dials` shows the frames)",
				s.levels[p[0]], s.levels[p[1]]))
		}
	}
}

// Frames says for each level which running phases its frame carries, as
// "clock − repump".
func (e *Experiment) Frames() []string {
	frames, err := models.FindFrames(e.shape.model())
	if err != nil {
		return nil
	}
	out := make([]string, len(e.shape.levels))
	for a := range out {
		var b strings.Builder
		for n, m := range frames.Counts[a] {
			sign := " + "
			if m < 0 {
				sign, m = " − ", -m
			}
			for ; m > 0; m-- {
				b.WriteString(sign + e.shape.drives[n].name)
			}
		}
		switch text := strings.TrimPrefix(b.String(), " + "); {
		case text != "":
			out[a] = strings.TrimSpace(text)
		case frames.Group[a] == 0:
			out[a] = "at rest"
		default:
			out[a] = "at rest with " + e.shape.levels[frames.Group[a]]
		}
	}
	return out
}

// checkLab holds what drives need that act as they are.
func (r *reader) checkLab() {
	s := r.e.shape
	lab := false
	for _, d := range s.drives {
		if d.lab != s.drives[0].lab {
			r.fail(s.root.at(joinKey("drive", d.name)), joinKey("drive", d.name)+".frame", "differs from that of drive %q; write frame = \"lab\" for all drives or for none", s.drives[0].name)
			return
		}
		lab = lab || d.lab
		if d.lab && d.linewidth != none {
			r.fail(s.nodes[d.linewidth], s.dials[d.linewidth].Path, "needs the frame of the drive, which frame = \"lab\" gives up; use a dephasing")
		}
	}
	for a, f := range s.energies {
		switch {
		case lab && f == none:
			r.fail(s.root.at(joinKey("level", s.levels[a])), joinKey("level", s.levels[a]), "has no energy; drives with frame = \"lab\" need the energy of every level, as in energy = \"0 Hz\"")
		case !lab && f != none:
			r.fail(s.nodes[f], s.dials[f].Path, "has no effect: in the frame of the drives only detunings count; write frame = \"lab\" in the drives or leave the energy out")
		}
	}
	for _, st := range s.steps {
		for _, d := range st.on {
			if f := st.chirpOf(d); lab && f != none {
				r.fail(s.nodes[f], s.dials[f].Path, "needs the frame of the drive, which frame = \"lab\" gives up")
			}
		}
		if lab && st.ideal {
			r.fail(s.nodes[st.area], s.dials[st.area].Path, "a rotation in no time needs the frame of the drive, which frame = \"lab\" gives up; let it last")
		}
	}
}

// warnIdleScans tells that a scan turns a dial of a step that is never played.
func (r *reader) warnIdleScans() {
	s := r.e.shape
	used := make([]bool, len(s.steps))
	uses(s.sequence.order, used)
	for _, sc := range s.scans {
		for _, f := range sc.dials {
			for i, st := range s.steps {
				if path := s.dials[f].Path; !used[i] && strings.HasPrefix(path, joinKey("step", st.name)+".") {
					r.warnings = append(r.warnings, fmt.Sprintf("scan.%s: turns %s, and no step that is played uses it", joinKey(sc.name), path))
				}
			}
		}
	}
}
