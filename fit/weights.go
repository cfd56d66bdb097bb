package fit

import (
	"fmt"
	"math"
)

// firstErrors sets the standard errors of a trace before any model is known.
func (m *measured) firstErrors() error {
	n := len(m.y)
	m.sigma = make([]float64, n)
	switch tr := m.trace; {
	case tr.Error != nil:
		m.known, m.weighting = true, "errors from the file"
		for i, s := range tr.Error {
			if !(s > 0) {
				return fmt.Errorf("%s: the standard error is %g; every error must be above zero (or leave y-error out)", m.place(i), s)
			}
			m.sigma[i] = s
		}
		m.divideCounts()
	case tr.Shots != nil && tr.Is != "value" && m.counting():
		m.known, m.weighting = true, "binomial errors from the shots"
		m.divideCounts()
		for i, y := range m.y {
			if y < -1e-9 || y > 1+1e-9 {
				return fmt.Errorf("%s: the signal is %g, which is no share of shots; for a signal in other units write y-is = \"value\"", m.place(i), y)
			}
			m.sigma[i] = CountError(math.Max(0, math.Min(1, y))*tr.Shots[i], tr.Shots[i])
		}
	case tr.Is == "counts":
		m.known, m.weighting = true, "Poisson errors of the counts"
		for i := range m.y {
			m.sigma[i] = math.Sqrt(math.Max(m.y[i], 1))
		}
		m.divideCounts()
	default:
		m.weighting = "errors estimated from the scatter"
		for i := range m.sigma {
			m.sigma[i] = 1
		}
	}
	return nil
}

// place is the file and line of a row.
func (m *measured) place(i int) string {
	if i < len(m.trace.Lines) {
		return fmt.Sprintf("%s:%d", m.trace.File, m.trace.Lines[i])
	}
	return fmt.Sprintf("%s: row %d", m.trace.File, i+1)
}

// counting reports whether the trace is a share of shots called bright.
func (m *measured) counting() bool {
	return m.trace.Is == "fraction" || m.trace.Is == "counts" && m.trace.Bright
}

// divideCounts turns counts into a mean per shot.
func (m *measured) divideCounts() {
	if m.trace.Is != "counts" || m.trace.Shots == nil {
		return
	}
	for i, n := range m.trace.Shots {
		m.y[i] /= n
		m.sigma[i] /= n
		if m.sigma[i] == 0 { // binomial: set from the shots afterwards
			m.sigma[i] = 1
		}
	}
}

// modelErrors takes the errors of counting from the model, which is free of
// the data's own scatter: weights from the data pull a fit towards points that
// happen to lie low or high.
func (m *measured) modelErrors(params []float64) {
	tr := m.trace
	if tr.Error != nil || !m.known {
		return
	}
	scale, offset := m.scale.at(params), m.offset.at(params)
	for i, p := range m.pred {
		v := offset + scale*p
		switch {
		case m.counting():
			n := tr.Shots[i]
			v = math.Max(0.5/(n+1), math.Min(1-0.5/(n+1), v))
			m.sigma[i] = math.Sqrt(v * (1 - v) / n)
		default:
			n := 1.0
			if tr.Shots != nil {
				n = tr.Shots[i]
			}
			m.sigma[i] = math.Sqrt(math.Max(v*n, 0.5)) / n
		}
	}
}
