// Package quantity turns numbers with units into text and back: "12.5 kHz" is
// 12500, "3 us" is exactly 3e-6. Values are in SI units; frequencies are
// ordinary ones (cycles per second), angles are in radians.
package quantity

import (
	"strconv"
	"strings"
)

// Dimension is what a number measures: a plain dimension, or one over a power
// of another. Dimensions can be compared. The zero value is One.
type Dimension struct {
	base, per base
	power     int // of per; 0 when there is none
}

type base int

const (
	one base = iota
	time
	frequency
	rate
	angle
	field
	power
	intensity
	length
	temperature
	mass
	velocity
	voltage
	current
	pressure
	bases // how many there are
)

// The plain dimensions. A rate (Γ, in 1/s) is no frequency (Γ/2π, in Hz).
var (
	One         = Dimension{base: one}
	Time        = Dimension{base: time}
	Frequency   = Dimension{base: frequency}
	Rate        = Dimension{base: rate}
	Angle       = Dimension{base: angle}
	Field       = Dimension{base: field}
	Power       = Dimension{base: power}
	Intensity   = Dimension{base: intensity}
	Length      = Dimension{base: length}
	Temperature = Dimension{base: temperature}
	Mass        = Dimension{base: mass}
	Velocity    = Dimension{base: velocity}
	Voltage     = Dimension{base: voltage}
	Current     = Dimension{base: current}
	Pressure    = Dimension{base: pressure}
)

var words = [bases]string{"number", "time", "frequency", "rate", "angle", "magnetic field", "power", "intensity", "length",
	"temperature", "mass", "velocity", "voltage", "current", "pressure"}

var siUnits = [bases]string{"1", "s", "Hz", "1/s", "rad", "T", "W", "W/m^2", "m", "K", "kg", "m/s", "V", "A", "Pa"}

// Per is the dimension of num over den to a power, which a weight has that
// turns one quantity into another. Over One it is num itself. It panics if num
// or den is a quotient or if the power is below 1.
func Per(num, den Dimension, power int) Dimension {
	if num.power != 0 || den.power != 0 || power < 1 {
		panic("quantity: Per takes plain dimensions and a power of at least 1")
	}
	if den == One {
		return num
	}
	return Dimension{base: num.base, per: den.base, power: power}
}

// Unit is the SI unit: "1", "s", "Hz", "Hz/T^2", "Hz/(W/m^2)".
func (d Dimension) Unit() string {
	if d.power == 0 {
		return siUnits[d.base]
	}
	return quotient(siUnits[d.base], siUnits[d.per], d.power)
}

// quotient writes over/under^power; what has a stroke itself goes in brackets.
func quotient(over, under string, power int) string {
	text := bracketed(over) + "/" + bracketed(under)
	if power > 1 {
		text += "^" + strconv.Itoa(power)
	}
	return text
}

func bracketed(unit string) string {
	if strings.Contains(unit, "/") {
		return "(" + unit + ")"
	}
	return unit
}

// Name is the dimension in words: "frequency", "frequency per magnetic field",
// "frequency per magnetic field^2".
func (d Dimension) Name() string {
	name := words[d.base]
	if d.power > 0 {
		name += " per " + words[d.per]
	}
	if d.power > 1 {
		name += "^" + strconv.Itoa(d.power)
	}
	return name
}

// a is the name with its article.
func (d Dimension) a() string {
	if strings.ContainsRune("aeiou", rune(words[d.base][0])) {
		return "an " + d.Name()
	}
	return "a " + d.Name()
}

// usual is the unit that examples are written in; Parse reads it.
func (d Dimension) usual() string {
	if d == Rate {
		return "/s"
	}
	return d.Unit()
}

// example is a text that Parse reads.
func (d Dimension) example() string {
	if d == One {
		return "0.5"
	}
	return "1 " + d.usual()
}

// listUnits names the units that fit.
func (d Dimension) listUnits() string {
	if d.power == 0 {
		return strings.Join(d.base.units(), ", ")
	}
	over, under := d.base.units(), d.per.units()
	if d.base == one {
		over = []string{"1"}
	}
	list := []string{d.Unit()}
	for i := 1; i < min(4, max(len(over), len(under))); i++ {
		list = append(list, quotient(over[min(i, len(over)-1)], under[min(i, len(under)-1)], d.power))
	}
	return strings.Join(list, ", ") + " and the like"
}
