package quantity

import (
	"math"
	"strconv"
	"strings"
)

// shown lists the units in which Format writes, largest first. Angles are in
// formatAngle.
var shown = [bases][]string{
	time:        {"s", "ms", "us", "ns", "ps", "fs"},
	frequency:   {"THz", "GHz", "MHz", "kHz", "Hz", "mHz"},
	rate:        {"/ns", "/us", "/ms", "/s"},
	field:       {"T", "mT", "uT", "nT", "pT", "fT"},
	power:       {"W", "mW", "uW", "nW"},
	intensity:   {"W/m^2"},
	length:      {"m", "mm", "um", "nm"},
	temperature: {"K", "mK", "uK", "nK"},
	mass:        {"kg"},
	velocity:    {"m/s"},
	voltage:     {"V", "mV"},
	current:     {"A", "mA"},
	pressure:    {"Pa"},
}

// Format writes v (SI) with the fewest digits and a fitting unit, so that Parse
// reads the same bits back: 0.04 s is "40 ms". Without dimension the number
// stands alone. Infinity is "inf s"; NaN is "nan s", which Parse does not read.
func Format(v float64, d Dimension) string {
	switch {
	case d == One:
		return shifted(v, 0)
	case v == 0 && d == Angle:
		return shifted(v, 0) + " deg"
	case v == 0 || math.IsInf(v, 0) || math.IsNaN(v):
		return shifted(v, 0) + " " + d.usual()
	case d == Angle:
		return shortest(v, Angle, "rad", "pi", "deg")
	case d == Mass:
		return shortest(v, Mass, "kg", "u")
	case d.power > 0:
		return formatQuotient(v, d)
	}
	list := shown[d.base]
	for _, name := range list {
		if u := findUnit(name); math.Abs(v) >= math.Pow10(u.exponent) {
			return shifted(v, u.exponent) + " " + name
		}
	}
	smallest := findUnit(list[len(list)-1])
	return shifted(v, smallest.exponent) + " " + smallest.name
}

// formatQuotient takes the shortest text over the units of either side. It
// keeps to powers of ten: with them every number has the same digits.
func formatQuotient(v float64, d Dimension) string {
	best := shifted(v, 0) + " " + d.Unit()
	for _, over := range shown[d.base] {
		o := findPart(over, d.base)
		if d.base == rate {
			over = "1" + over
		}
		for _, under := range []string{siUnits[d.per], "G"} {
			u := findPart(under, d.per)
			if u == nil {
				continue
			}
			text := shifted(v, o.exponent-d.power*u.exponent) + " " + quotient(over, under, d.power)
			if len(text) < len(best) {
				best = text
			}
		}
	}
	return best
}

// shortest writes v in the first unit, the SI unit, or in one of the others
// where that is no longer and has the same bits. The factors of those are no
// powers of ten, so that some values have no short number there, or none.
func shortest(v float64, d Dimension, si string, others ...string) string {
	best := shifted(v, 0) + " " + si
	for _, name := range others {
		size, _ := findUnit(name).factor.Float64()
		for digits := 1; digits <= 17; digits++ {
			x, err := strconv.ParseFloat(strconv.FormatFloat(v/size, 'g', digits, 64), 64)
			if err != nil {
				break
			}
			if math.Abs(x*size-v) > 1e-15*math.Abs(v) {
				continue // too far off to be worth an exact product
			}
			text := shifted(x, 0) + " " + name
			if len(text) > len(best) {
				break
			}
			if back, err := Parse(text, d); err == nil && math.Float64bits(back) == math.Float64bits(v) {
				best = text
				break
			}
		}
	}
	return best
}

// shifted writes v / 10^exponent by moving the point in the shortest decimal
// text of v, so that no digit changes.
func shifted(v float64, exponent int) string {
	switch {
	case math.IsNaN(v):
		return "nan"
	case math.IsInf(v, 1):
		return "inf"
	case math.IsInf(v, -1):
		return "-inf"
	case v == 0 && math.Signbit(v):
		return "-0"
	case v == 0:
		return "0"
	}
	mantissa, power, _ := strings.Cut(strconv.FormatFloat(math.Abs(v), 'e', -1, 64), "e")
	e, _ := strconv.Atoi(power) // FormatFloat wrote it
	e -= exponent
	sign := ""
	if v < 0 {
		sign = "-"
	}
	digits := strings.Replace(mantissa, ".", "", 1)
	switch {
	case e < -5 || e > 20 || e > len(digits)+6:
		return sign + mantissa + "e" + strconv.Itoa(e)
	case e < 0:
		return sign + "0." + strings.Repeat("0", -e-1) + digits
	case e+1 >= len(digits):
		return sign + digits + strings.Repeat("0", e+1-len(digits))
	}
	return sign + digits[:e+1] + "." + digits[e+1:]
}
