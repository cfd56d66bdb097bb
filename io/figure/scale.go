package figure

import (
	"math"
	"strconv"
	"strings"
)

// A scale turns SI values into the numbers along an axis:
// shown = (value − origin)/size.
type scale struct {
	origin, size float64
	unit         string // as printed, with its prefix; "" for a plain number
}

func (s scale) shown(value float64) float64 { return (value - s.origin) / s.size }

// prefixes of the SI, by power of ten.
var prefixes = map[int]string{-15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}

// prefixed are the units that take a prefix, with the largest power of ten
// that is in use (no kiloseconds).
var prefixed = map[string]int{
	"s": 0, "Hz": 12, "T": 0, "W": 6, "m": 3, "V": 6, "A": 3, "Pa": 9, "K": 0, "rad": -3, "C": 0, "J": 9,
}

// scaleFor chooses the scale for values from low to high, low < high; positive
// both where the axis is logarithmic.
func scaleFor(unit string, low, high float64, log bool) scale {
	s := scale{size: 1, unit: printedUnit(unit)}
	largest := max(math.Abs(low), math.Abs(high))
	switch {
	case log && high/low > 1e4:
		return s // numbers are powers of ten
	case log:
		largest = math.Pow(low, 0.25) * math.Pow(high, 0.75) // numbers from 0.001 to 10000
	case largest > 1e4*(high-low):
		// Five and more digits would be the same along the whole axis: count
		// from a round value inside instead.
		step := math.Pow10(int(math.Ceil(math.Log10(high - low))))
		s.origin = step * math.Round((low+(high-low)/2)/step)
		largest = max(math.Abs(low-s.origin), math.Abs(high-s.origin))
	}
	if unit == "rad" && largest >= 0.3 {
		s.size, s.unit = math.Pi, "π rad"
		return s
	}
	power := 3 * int(math.Floor(math.Log10(largest*(1+1e-9))/3))
	if highest, ok := prefixed[unit]; ok {
		prefix := min(max(power, -15), highest)
		if left := largest / math.Pow10(prefix); left >= 0.01 && left < 1e5 {
			s.size, s.unit = math.Pow10(prefix), prefixes[prefix]+s.unit
			return s
		}
	}
	if largest < 0.01 || largest >= 1e5 {
		s.size = math.Pow10(power)
		s.unit = strings.TrimSpace("10" + superscript(strconv.Itoa(power)) + " " + s.unit)
	}
	return s
}

// printedUnit writes powers and reciprocals as in print: "1/s" is s⁻¹, "Hz/T^2"
// is Hz/T².
func printedUnit(unit string) string {
	if unit == "1" {
		return ""
	}
	var out strings.Builder
	for i, part := range strings.Split(unit, "^") {
		if i == 0 {
			out.WriteString(part)
			continue
		}
		digits := 0
		for digits < len(part) && (part[digits] == '-' || '0' <= part[digits] && part[digits] <= '9') {
			digits++
		}
		out.WriteString(superscript(part[:digits]) + part[digits:])
	}
	text := out.String()
	if below, ok := strings.CutPrefix(text, "1/"); ok && !strings.ContainsAny(below, "/⁰¹²³⁴⁵⁶⁷⁸⁹⁻") {
		return below + "⁻¹"
	}
	return text
}

// labelled adds the origin and the unit to an axis label.
func (s scale) labelled(label string, unit string) string {
	if s.origin != 0 {
		o := s.origin
		from := scaleFor(unit, min(o, 0), max(o, 0), false)
		label += " − " + strings.Replace(strconv.FormatFloat(from.shown(o), 'g', -1, 64), "-", "−", 1)
		if from.unit != "" {
			label += " " + from.unit
		}
	}
	if s.unit != "" {
		label += " (" + s.unit + ")"
	}
	return strings.TrimSpace(label)
}
