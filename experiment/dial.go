package experiment

import (
	"fmt"
	"math"

	"rhotrace/io/quantity"
)

// Dial is one number of an experiment, named by its place in the file.
type Dial struct {
	Path      string   // "step.dark.lasts", exactly the dotted key of the file
	Unit, Doc string   // SI unit ("1" without dimension), meaning
	Low, High float64  // allowed range, SI, both included
	Off       *float64 // the value that means "this imperfection is absent"; nil if there is none
	Whole     bool     // takes whole numbers only

	dimension quantity.Dimension
}

// field is the index of a quantity in the vector of values; none if the file
// does not have it.
type field int

const none field = -1

// kind says what a quantity may be.
type kind struct {
	dimension quantity.Dimension
	low, high float64
	off       *float64
	standard  *float64 // value when the file has none
	needed    bool
	whole     bool
}

func of(d quantity.Dimension) kind {
	return kind{dimension: d, low: math.Inf(-1), high: math.Inf(1)}
}

var (
	number      = of(quantity.One)
	timeSpan    = of(quantity.Time).from(0)
	frequency   = of(quantity.Frequency)
	angle       = of(quantity.Angle)
	rate        = of(quantity.Rate).from(0)
	probability = number.from(0).to(1)
)

func (k kind) from(low float64) kind { k.low = low; return k }
func (k kind) to(high float64) kind  { k.high = high; return k }

// above excludes the limit itself.
func (k kind) above(low float64) kind { return k.from(math.Nextafter(low, math.Inf(1))) }

func (k kind) offAt(v float64) kind { k.off = &v; return k }
func (k kind) or(v float64) kind    { k.standard = &v; return k }
func (k kind) need() kind           { k.needed = true; return k }
func (k kind) wholly() kind         { k.whole = true; return k }

// inf reports whether "inf" may be written: only as the value that switches an
// imperfection off.
func (k kind) inf() bool { return k.off != nil && math.IsInf(*k.off, 1) }

// check returns in words what is wrong with value v, or "".
func (d *Dial) check(v float64) string {
	show := func(v float64) string { return quantity.Format(v, d.dimension) }
	switch {
	case math.IsNaN(v):
		return "is not a number"
	case math.IsInf(v, 0) && (d.Off == nil || *d.Off != v):
		return fmt.Sprintf("is infinite; allowed is %s", d.Range())
	case v < d.Low || v > d.High:
		return fmt.Sprintf("is %s; allowed is %s", show(v), d.Range())
	case d.Whole && v != math.Trunc(v):
		return fmt.Sprintf("is %s; it takes whole numbers only", show(v))
	}
	return ""
}

// Range is the allowed range in words.
func (d *Dial) Range() string {
	show := func(v float64) string { return quantity.Format(v, d.dimension) }
	low := d.Low
	word := show(low) + " or more"
	if lower := math.Nextafter(low, math.Inf(-1)); low > 0 && low < 1e-300 {
		word = "more than " + show(math.Trunc(lower))
	}
	switch noLow, noHigh := math.IsInf(d.Low, -1), math.IsInf(d.High, 1); {
	case noLow && noHigh:
		return "any value"
	case noHigh:
		return word
	case noLow:
		return show(d.High) + " or less"
	}
	return fmt.Sprintf("%s to %s", show(d.Low), show(d.High))
}

// Format writes a value of the dial with a fitting unit, so that the file
// reader reads the same bits back.
func (d *Dial) Format(v float64) string { return quantity.Format(v, d.dimension) }

// Parse reads a value of the dial, "200 Hz" or, without dimension, "0.5".
func (d *Dial) Parse(text string) (float64, error) {
	return kind{dimension: d.dimension, off: d.Off}.parse(text)
}

func (k kind) parse(text string) (float64, error) {
	v, err := quantity.Parse(text, k.dimension)
	if err == nil && math.IsInf(v, 0) && !(k.inf() && v > 0) {
		return 0, fmt.Errorf("%q: an infinite value is not allowed here", text)
	}
	return v, err
}
