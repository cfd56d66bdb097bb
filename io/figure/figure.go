// Package figure draws tables and measured traces: curves, points with error
// bars and colour maps, as PNG, SVG or PDF at the size of a printed page.
//
// Numbers are given in SI units; each axis chooses its own prefix. NaN and
// infinite values are left out and leave gaps.
package figure

import (
	"errors"
	"fmt"
	"math"
)

// A Figure is a stack of panels.
type Figure struct {
	Title  string
	Panels []Panel // from top to bottom

	// Width and Height are in centimetres. 0 is the default: 16 wide, and 10
	// high times the sum of the panels' shares, 25 at most.
	Width, Height float64
}

// A Panel is one frame with its axes. Neighbouring panels with equal X share
// that axis: equal range, numbers and label only below the last.
type Panel struct {
	X, Y   Axis
	Lines  []Line
	Points []Points
	Map    *Map

	// Horizontals and Verticals are thin grey lines at these values of y and x,
	// for example at 0 under residuals.
	Horizontals, Verticals []float64

	// Share is the height of the panel relative to the others. 0 is the default: 1.
	Share float64
}

// An Axis says what is drawn along it.
type Axis struct {
	Label string
	Unit  string // SI, "1" or "" without dimension; the drawing adds a prefix
	Log   bool   // logarithmic: values that are not positive are left out
}

// A Line is a curve through points in the order given.
type Line struct {
	Label     string // in the legend; no entry if ""
	X, Y      []float64
	Low, High []float64 // optional: limits of a shaded band, both or none
}

// Points are single values, for example a measured trace. The points number i
// of a panel get the colour of its line number i if there are several of them;
// a single set is black.
type Points struct {
	Label string // in the legend; no entry if ""
	X, Y  []float64
	Error []float64 // optional: half the length of the error bars
}

// A Map shows a value over two axes as colour.
type Map struct {
	X, Y   []float64   // places of the columns and rows of cells, increasing
	Values [][]float64 // Values[i][j] belongs to X[i], Y[j]; NaN is left white
	Value  Axis        // label and unit of the colour bar; always linear
}

// largest and smallest bound what can be drawn without overflow; below
// smallest a value is as good as 0.
const (
	largest  = 1e300
	smallest = 1e-290
)

// usable says whether a value can stand on an axis.
func (a Axis) usable(v float64) bool {
	return !math.IsNaN(v) && !math.IsInf(v, 0) && (!a.Log || v > smallest)
}

// Check returns an error that names what cannot be drawn: no panels, lengths
// that differ, a panel without a finite value, values above 1e300.
func (f *Figure) Check() error {
	if len(f.Panels) == 0 {
		return errors.New("figure: nothing to draw: the figure has no panels")
	}
	if !(f.Width >= 0 && f.Width <= 200 && f.Height >= 0 && f.Height <= 200) {
		return fmt.Errorf("figure: a size of %g cm × %g cm cannot be drawn; give at most 200 cm, or 0 for the default", f.Width, f.Height)
	}
	for i := range f.Panels {
		if err := f.Panels[i].check(); err != nil {
			return fmt.Errorf("figure: panel %d (%s): %w", i+1, f.Panels[i].Y.Label, err)
		}
	}
	return nil
}

func (p *Panel) check() error {
	if !(p.Share >= 0 && p.Share <= 100) {
		return fmt.Errorf("a share of %g of the height cannot be drawn; give 0 to 100", p.Share)
	}
	found := false
	look := func(what string, x, y []float64) error {
		if len(x) != len(y) {
			return fmt.Errorf("%s: %d values of x, %d of y; there must be as many", what, len(x), len(y))
		}
		for k := range x {
			if p.X.usable(x[k]) && p.Y.usable(y[k]) {
				found = true
				if math.Abs(x[k]) > largest || math.Abs(y[k]) > largest {
					return fmt.Errorf("%s: (%g, %g) is too large to be drawn", what, x[k], y[k])
				}
			}
		}
		return nil
	}
	for _, l := range p.Lines {
		what := fmt.Sprintf("line %q", l.Label)
		if err := look(what, l.X, l.Y); err != nil {
			return err
		}
		if len(l.Low) != len(l.High) {
			return fmt.Errorf("%s: %d lower and %d upper limits of the band; give both or none", what, len(l.Low), len(l.High))
		}
		if len(l.Low) > 0 {
			if err := errors.Join(look(what, l.X, l.Low), look(what, l.X, l.High)); err != nil {
				return err
			}
		}
	}
	for _, q := range p.Points {
		what := fmt.Sprintf("points %q", q.Label)
		if err := look(what, q.X, q.Y); err != nil {
			return err
		}
		if len(q.Error) > 0 {
			if err := look(what, q.X, q.Error); err != nil {
				return err
			}
		}
	}
	if p.Map != nil {
		if err := p.checkMap(); err != nil {
			return err
		}
		found = true
	}
	if !found {
		why := "there is no finite value"
		if p.X.Log || p.Y.Log {
			why = "there is no finite value, positive where the axis is logarithmic"
		}
		return errors.New("nothing to draw: " + why)
	}
	return nil
}

func (p *Panel) checkMap() error {
	m := p.Map
	if len(m.Values) != len(m.X) {
		return fmt.Errorf("map: %d columns of values, %d places for them", len(m.Values), len(m.X))
	}
	finite := false
	for i, column := range m.Values {
		if len(column) != len(m.Y) {
			return fmt.Errorf("map: %d values in column %d, %d places for them", len(column), i, len(m.Y))
		}
		for _, v := range column {
			if !math.IsNaN(v) && !math.IsInf(v, 0) {
				finite = true
				if math.Abs(v) > largest {
					return fmt.Errorf("map: %g is too large to be drawn", v)
				}
			}
		}
	}
	for name, places := range map[string]struct {
		at   []float64
		axis Axis
	}{"X": {m.X, p.X}, "Y": {m.Y, p.Y}} {
		for i, v := range places.at {
			if !places.axis.usable(v) || math.Abs(v) > largest || i > 0 && v <= places.at[i-1] {
				return fmt.Errorf("map: %s[%d] = %g: places must be finite and increasing, positive where the axis is logarithmic", name, i, v)
			}
		}
	}
	if !finite {
		return errors.New("nothing to draw: the map has no finite value")
	}
	return nil
}
