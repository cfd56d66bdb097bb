package quantity

import (
	"math/big"
	"strings"
)

// unit is a unit of a plain dimension: factor × 10^exponent of the SI unit.
type unit struct {
	name     string
	of       base
	exponent int
	factor   *big.Rat // nil: one
}

// Factors that are no powers of ten. 60 and 3600 s, the degree and the torr,
// 101325/760 Pa, are exact by definition (NIST SP 811, appendix B.8). The atomic
// mass constant is that of CODATA 2022 (arXiv:2409.03787); its uncertainty is
// 3.1e-10. π is cut after 60 decimals, 44 more than a float64 can hold.
var (
	sixty  = rational("60")
	hour   = rational("3600")
	pi     = rational("3.141592653589793238462643383279502884197169399375105820974944")
	degree = new(big.Rat).Quo(pi, rational("180"))
	torr   = rational("101325/760")
	atomic = rational("1.66053906892e-27")
)

func rational(text string) *big.Rat {
	r, ok := new(big.Rat).SetString(text)
	if !ok {
		panic("quantity: " + text + " is no number")
	}
	return r
}

// units lists every unit; within a dimension the SI unit comes first. Rates
// begin with a stroke, so that "3.8e7 /s" cannot be taken for a frequency.
var units = []unit{
	{"%", one, -2, nil},
	{"s", time, 0, nil}, {"ms", time, -3, nil}, {"us", time, -6, nil}, {"ns", time, -9, nil},
	{"ps", time, -12, nil}, {"fs", time, -15, nil}, {"min", time, 0, sixty}, {"h", time, 0, hour},
	{"Hz", frequency, 0, nil}, {"mHz", frequency, -3, nil}, {"kHz", frequency, 3, nil}, {"MHz", frequency, 6, nil},
	{"GHz", frequency, 9, nil}, {"THz", frequency, 12, nil},
	{"/s", rate, 0, nil}, {"/ms", rate, 3, nil}, {"/us", rate, 6, nil}, {"/ns", rate, 9, nil},
	{"/min", rate, 0, new(big.Rat).Inv(sixty)}, {"/h", rate, 0, new(big.Rat).Inv(hour)},
	{"rad", angle, 0, nil}, {"mrad", angle, -3, nil}, {"deg", angle, 0, degree}, {"pi", angle, 0, pi},
	{"T", field, 0, nil}, {"mT", field, -3, nil}, {"uT", field, -6, nil}, {"nT", field, -9, nil},
	{"pT", field, -12, nil}, {"fT", field, -15, nil}, {"G", field, -4, nil}, {"mG", field, -7, nil},
	{"W", power, 0, nil}, {"mW", power, -3, nil}, {"uW", power, -6, nil}, {"nW", power, -9, nil},
	{"W/m^2", intensity, 0, nil}, {"mW/cm^2", intensity, 1, nil}, {"W/cm^2", intensity, 4, nil},
	{"m", length, 0, nil}, {"cm", length, -2, nil}, {"mm", length, -3, nil}, {"um", length, -6, nil}, {"nm", length, -9, nil},
	{"K", temperature, 0, nil}, {"mK", temperature, -3, nil}, {"uK", temperature, -6, nil}, {"nK", temperature, -9, nil},
	{"kg", mass, 0, nil}, {"u", mass, 0, atomic},
	{"m/s", velocity, 0, nil},
	{"V", voltage, 0, nil}, {"mV", voltage, -3, nil},
	{"A", current, 0, nil}, {"mA", current, -3, nil},
	{"Pa", pressure, 0, nil}, {"mbar", pressure, 2, nil}, {"Torr", pressure, 0, torr},
}

// otherNames are words and signs that people write for units; they are not read,
// but the message about them names the unit.
var otherNames = map[string]string{
	"sec": "s", "second": "s", "msec": "ms", "usec": "us", "nsec": "ns", "minute": "min", "hr": "h", "hour": "h",
	"hertz": "Hz", "radian": "rad", "degree": "deg", "°": "deg", "π": "pi", "tesla": "T", "gauss": "G", "gs": "G",
	"watt": "W", "metre": "m", "meter": "m", "micron": "um", "kelvin": "K", "amu": "u", "da": "u",
	"volt": "V", "amp": "A", "ampere": "A", "pascal": "Pa", "percent": "%",
	"w/m2": "W/m^2", "w/m²": "W/m^2", "mw/cm2": "mW/cm^2", "mw/cm²": "mW/cm^2", "w/cm2": "W/cm^2", "w/cm²": "W/cm^2",
}

func findUnit(name string) *unit {
	for i := range units {
		if units[i].name == name {
			return &units[i]
		}
	}
	return nil
}

// units lists the names of the units of a plain dimension.
func (b base) units() (names []string) {
	for _, u := range units {
		if u.of == b {
			names = append(names, u.name)
		}
	}
	return names
}

// findPart finds a unit of one side of a quotient. Brackets round it may be
// left out, and a rate may have a one in front of its stroke: "(1/us)", "/us".
func findPart(name string, of base) *unit {
	if strings.HasPrefix(name, "(") && strings.HasSuffix(name, ")") {
		name = name[1 : len(name)-1]
	}
	if of == rate {
		name = strings.TrimPrefix(name, "1")
	}
	if u := findUnit(name); u != nil && u.of == of {
		return u
	}
	if of == one && (name == "" || name == "1") {
		return &unit{of: one}
	}
	return nil
}
