package quantity

import (
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

var plain = []Dimension{One, Time, Frequency, Rate, Angle, Field, Power, Intensity, Length, Temperature, Mass, Velocity,
	Voltage, Current, Pressure}

// SI prefixes: BIPM, The International System of Units, 9th ed., table 7.
// min, h, degree: table 8. Gauss 1e-4 T, torr 101325/760 Pa (133.322 Pa), bar
// 1e5 Pa: NIST SP 811, appendix B.8. Dalton: CODATA 2022, 1.66053906892e-27 kg.
// Each want is a constant that the compiler rounds once.
func TestParse(t *testing.T) {
	for _, c := range []struct {
		text string
		d    Dimension
		want float64
	}{
		{"0.5", One, 0.5}, {"3", One, 3}, {"-1.5e-3", One, -1.5e-3}, {"5 %", One, 5e-2}, {"0.3 %", One, 0.3e-2},
		{"1_000.000_1", One, 1000.0001}, {"+0", One, 0},
		{"1 s", Time, 1}, {"3 ms", Time, 3e-3}, {"3 us", Time, 3e-6}, {"40 ns", Time, 40e-9}, {"7 ps", Time, 7e-12}, {"7 fs", Time, 7e-15},
		{"1.5 min", Time, 90}, {"0.1 min", Time, 6}, {"2 h", Time, 7200}, {"0.7 h", Time, 2520}, {"3 µs", Time, 3e-6}, {"3 μs", Time, 3e-6},
		{"  3\tus ", Time, 3e-6}, {"3\u00a0us", Time, 3e-6}, {"3   us", Time, 3e-6}, {"1e3 us", Time, 1e-3}, {"+2E-1_0 s", Time, 2e-10},
		{"12.5 kHz", Frequency, 12500}, {"1 Hz", Frequency, 1}, {"70 mHz", Frequency, 0.07}, {"6.065 MHz", Frequency, 6065000},
		{"6.834682610904 GHz", Frequency, 6834682610.904}, {"384.2304844685 THz", Frequency, 384230484468500}, {"-200 Hz", Frequency, -200},
		{"3.8e7 /s", Rate, 3.8e7}, {"38 /us", Rate, 3.8e7}, {"2 /ms", Rate, 2000}, {"0.1 /ns", Rate, 1e8}, {"30 /min", Rate, 0.5}, {"900 /h", Rate, 0.25},
		{"1 rad", Angle, 1}, {"12 mrad", Angle, 0.012}, {"0.5 pi", Angle, math.Pi / 2}, {"1 pi", Angle, math.Pi}, {"0.3 pi", Angle, 0.3 * math.Pi},
		{"90 deg", Angle, math.Pi / 2}, {"-180 deg", Angle, -math.Pi}, {"54.7356 deg", Angle, 54.7356 * math.Pi / 180}, {"0 deg", Angle, 0},
		{"1.2 G", Field, 1.2e-4}, {"3 mG", Field, 3e-7}, {"50 uT", Field, 50e-6}, {"5 nT", Field, 5e-9}, {"7 pT", Field, 7e-12}, {"7 fT", Field, 7e-15}, {"3 mT", Field, 3e-3}, {"3 T", Field, 3},
		{"20 mW", Power, 0.02}, {"3 uW", Power, 3e-6}, {"9 nW", Power, 9e-9}, {"2 W", Power, 2},
		{"16.7 W/m^2", Intensity, 16.7}, {"1.67 mW/cm^2", Intensity, 16.7}, {"3 W/cm^2", Intensity, 3e4},
		{"780.241209686 nm", Length, 780.241209686e-9}, {"3 um", Length, 3e-6}, {"3 mm", Length, 3e-3}, {"3 cm", Length, 3e-2}, {"3 m", Length, 3},
		{"3 K", Temperature, 3}, {"3 mK", Temperature, 3e-3}, {"146 uK", Temperature, 146e-6}, {"3 nK", Temperature, 3e-9},
		{"1 u", Mass, 1.66053906892e-27}, {"86.909180520 u", Mass, 86.909180520 * 1.66053906892e-27}, {"3 kg", Mass, 3},
		{"3 m/s", Velocity, 3}, {"5 V", Voltage, 5}, {"5 mV", Voltage, 5e-3}, {"5 A", Current, 5}, {"5 mA", Current, 5e-3},
		{"5 Pa", Pressure, 5}, {"3 mbar", Pressure, 300}, {"760 Torr", Pressure, 101325}, {"1 Torr", Pressure, 101325. / 760},
		{"inf s", Time, math.Inf(1)}, {"+inf ms", Time, math.Inf(1)}, {"-inf Hz", Frequency, math.Inf(-1)}, {"inf", One, math.Inf(1)},

		{"700 kHz/G", Per(Frequency, Field, 1), 700e7}, {"1.4 MHz/G", Per(Frequency, Field, 1), 1.4e10}, {"14 GHz/T", Per(Frequency, Field, 1), 14e9},
		{"575 Hz/G^2", Per(Frequency, Field, 2), 575e8}, {"5 deg/min", Per(Angle, Time, 1), math.Pi / 2160}, {"2 rad/s", Per(Angle, Time, 1), 2},
		{"3 Hz/(mW/cm^2)", Per(Frequency, Intensity, 1), 0.3}, {"3 Hz/mW/cm^2", Per(Frequency, Intensity, 1), 0.3}, {"3 Hz/(W/m^2)^2", Per(Frequency, Intensity, 2), 3},
		{"1.28 MHz/(m/s)", Per(Frequency, Velocity, 1), 1.28e6}, {"2 /us/G", Per(Rate, Field, 1), 2e10}, {"2 (1/us)/G", Per(Rate, Field, 1), 2e10},
		{"2 (W/m^2)/V", Per(Intensity, Voltage, 1), 2}, {"3 /G", Per(One, Field, 1), 3e4}, {"3 1/G", Per(One, Field, 1), 3e4}, {"3 %/mW", Per(One, Power, 1), 30},
		{"1 us/(1/s)", Per(Time, Rate, 1), 1e-6}, {"3 kHz/kHz", Per(Frequency, Frequency, 1), 3}, {"1 Hz/h^2", Per(Frequency, Time, 2), 1. / 3600 / 3600},
		{"7 MHz", Per(Frequency, One, 3), 7e6},
	} {
		got, err := Parse(c.text, c.d)
		if assert.NoError(t, err, c.text) {
			assert.Equal(t, math.Float64bits(c.want), math.Float64bits(got), "%s: %v, want %v", c.text, got, c.want)
		}
	}
}

// A refused text is answered with what to do.
func TestParseRefuses(t *testing.T) {
	perField := Per(Frequency, Field, 1)
	for _, c := range []struct {
		text string
		d    Dimension
		says []string
	}{
		{"", Time, []string{"empty", `"1 s"`}}, {"  ", One, []string{"empty", `"0.5"`}},
		{"10", Frequency, []string{"needs a unit", "frequency", `"10 Hz"`}}, {"3.8e7", Rate, []string{`"3.8e7 /s"`}}, {"inf", Time, []string{`"inf s"`}},
		{"3", Per(Frequency, Field, 2), []string{`"3 Hz/T^2"`}},
		{"3us", Time, []string{"space", `"3 us"`}}, {"1e-3kHz", Frequency, []string{`"1e-3 kHz"`}}, {"5%", One, []string{`"5 %"`}}, {"0.5pi", Angle, []string{`"0.5 pi"`}},
		{"5/s", Rate, []string{`"5 /s"`}},
		{"us", Time, []string{"not a time"}}, {"nan", One, []string{"not a number"}}, {"nan s", Time, []string{"not a number"}}, {"three us", Time, []string{"three", "not a number"}},
		{"1,5 us", Time, []string{"point"}}, {".5 us", Time, []string{"both sides"}}, {"5. us", Time, []string{"both sides"}}, {"007 us", Time, []string{"zeros"}},
		{"1__0 us", Time, []string{"not a number"}}, {"_1 us", Time, []string{"not a number"}}, {"0x10 us", Time, []string{"not a number"}}, {"--1 us", Time, []string{"not a number"}},
		{"1e us", Time, []string{"not a number"}}, {"Infinity s", Time, []string{"not a number"}},
		{"10 us", Frequency, []string{"us is a unit of time", "a frequency is wanted", "kHz"}}, {"10 m", Time, []string{"unit of length", "min"}}, {"10 kHz", One, []string{"unit of frequency", "%"}},
		{"6 MHz", Rate, []string{"unit of frequency", "a rate is wanted", "/us", "2π", "linewidth"}}, {"6 /us", Frequency, []string{"unit of rate", "Hz", "2π"}},
		{"10 rad/s", Frequency, []string{"2π", "Hz", "/us"}}, {"10 Mrad/s", Frequency, []string{"2π", "Hz"}}, {"10 rad s^-1", Frequency, []string{"2π", "Hz"}}, {"10 rad/s", Rate, []string{"2π", "/us", "Hz"}},
		{"10 radians per second", Frequency, []string{"2π", "Hz"}}, {"10 rad·s⁻¹", Frequency, []string{"2π", "Hz"}},
		{"10 1/s", Rate, []string{"/us", "2π", "Hz"}}, {"10 1/s", Frequency, []string{"/us", "2π", "Hz"}}, {"10 us^-1", Rate, []string{"/us", "2π", "Hz"}}, {"10 us^-1", Frequency, []string{"/us", "2π", "Hz"}},
		{"10 s⁻¹", Frequency, []string{"2π"}}, {"10 per second", Rate, []string{"/s"}}, {"10 1 / s", Rate, []string{"/s"}},
		{"10 khz", Frequency, []string{"did you mean kHz?"}}, {"10 mhz", Frequency, []string{"did you mean mHz or MHz?"}}, {"10 kHzz", Frequency, []string{"did you mean kHz"}}, {"10 hertz", Frequency, []string{"did you mean Hz?"}},
		{"10 sec", Time, []string{"did you mean s?"}}, {"10 seconds", Time, []string{"did you mean s?"}}, {"10 usec", Time, []string{"did you mean us?"}}, {"10 hrs", Time, []string{"did you mean h?"}},
		{"90 °", Angle, []string{"did you mean deg?"}}, {"90 degrees", Angle, []string{"did you mean deg?"}}, {"0.5 π", Angle, []string{"did you mean pi?"}}, {"1 Gauss", Field, []string{"did you mean G?"}},
		{"87 amu", Mass, []string{"did you mean u?"}}, {"1 mW/cm2", Intensity, []string{"did you mean mW/cm^2?"}}, {"1 / s", Rate, []string{"did you mean /s?"}}, {"1 torr", Pressure, []string{"did you mean Torr?"}},
		{"10 parsec", Time, []string{`no unit "parsec"`, "fs, min, h"}}, {"10 us us", Time, []string{"no unit"}},
		{"700 kHz", perField, []string{"kHz is a unit of frequency", "frequency per magnetic field", "Hz/T"}}, {"700 kHz/us", perField, []string{"no unit", "Hz/T"}},
		{"700 kHz/G", Per(Frequency, Field, 2), []string{"Hz/T^2"}}, {"575 Hz/G^2", perField, []string{"Hz/T"}}, {"3 /", Per(One, Field, 1), []string{"1/T"}},
		{"1e400 s", Time, []string{"beyond"}}, {"1e-400 s", Time, []string{"beyond"}}, {"1e9999999999999999999 s", Time, []string{"beyond"}}, {"1.7e308 h", Time, []string{"beyond"}}, {"1e-310 u", Mass, []string{"beyond"}},
		{"0." + strings.Repeat("3", 2000) + " s", Time, []string{"too long"}},
	} {
		_, err := Parse(c.text, c.d)
		if assert.Error(t, err, c.text) {
			for _, s := range c.says {
				assert.Contains(t, err.Error(), s, c.text)
			}
		}
	}
}

// What multiplying in float64 gets wrong: 5 × 1e-6 is not 5e-6.
func TestPowersOfTenAreExact(t *testing.T) {
	five, micro := 5.0, 1e-6
	require.NotEqual(t, 5e-6, five*micro)
	for _, u := range units {
		if u.factor != nil {
			continue
		}
		d := Dimension{base: u.of}
		for _, digits := range []string{"5", "0.7", "1.1", "6.1234567890123", "9007199254740993"} {
			want, err := strconv.ParseFloat(fmt.Sprintf("%se%d", digits, u.exponent), 64)
			require.NoError(t, err)
			got, err := Parse(digits+" "+u.name, d)
			require.NoError(t, err)
			assert.Equal(t, want, got, "%s %s", digits, u.name)
		}
	}
}

// π is compared with math/big's own arithmetic: Machin's formula
// π = 16 atan(1/5) − 4 atan(1/239) (J. Machin 1706) in rationals.
func TestPi(t *testing.T) {
	atan := func(n int64) *big.Rat {
		sum, power := new(big.Rat), big.NewRat(1, n)
		square := big.NewRat(1, n*n)
		for k := int64(0); k < 60; k++ {
			term := new(big.Rat).Mul(power, big.NewRat(1-2*(k%2), 2*k+1))
			sum.Add(sum, term)
			power.Mul(power, square)
		}
		return sum
	}
	machin := new(big.Rat).Sub(new(big.Rat).Mul(big.NewRat(16, 1), atan(5)), new(big.Rat).Mul(big.NewRat(4, 1), atan(239)))
	assert.Equal(t, machin.FloatString(59), pi.FloatString(59))
}

func TestFormat(t *testing.T) {
	for _, c := range []struct {
		v    float64
		d    Dimension
		want string
	}{
		{0.5, One, "0.5"}, {3, One, "3"}, {1e-8, One, "1e-8"}, {1e300, One, "1e300"}, {math.Copysign(0, -1), One, "-0"}, {math.Inf(1), One, "inf"},
		{0.04, Time, "40 ms"}, {3e-6, Time, "3 us"}, {1.5, Time, "1.5 s"}, {0, Time, "0 s"}, {3600, Time, "3600 s"}, {2e-17, Time, "0.02 fs"},
		{math.Inf(1), Time, "inf s"}, {math.Inf(-1), Frequency, "-inf Hz"}, {math.Inf(1), Rate, "inf /s"}, {math.NaN(), Time, "nan s"},
		{12500, Frequency, "12.5 kHz"}, {-200, Frequency, "-200 Hz"}, {384230484468500, Frequency, "384.2304844685 THz"}, {0.07, Frequency, "70 mHz"}, {1e-6, Frequency, "0.001 mHz"},
		{3.8e7, Rate, "38 /us"}, {0.5, Rate, "0.5 /s"}, {0, Rate, "0 /s"},
		{math.Pi / 2, Angle, "90 deg"}, {math.Pi, Angle, "1 pi"}, {1, Angle, "1 rad"}, {0, Angle, "0 deg"}, {math.Copysign(0, -1), Angle, "-0 deg"}, {math.Pi / 4, Angle, "45 deg"},
		{1.2e-4, Field, "120 uT"}, {0.02, Power, "20 mW"}, {16.7, Intensity, "16.7 W/m^2"}, {780e-9, Length, "780 nm"}, {146e-6, Temperature, "146 uK"},
		{1.66053906892e-27, Mass, "1 u"}, {3, Mass, "3 kg"}, {250, Velocity, "250 m/s"}, {0.1, Voltage, "100 mV"}, {0.1, Current, "100 mA"}, {101325, Pressure, "101325 Pa"},
		{1.4e10, Per(Frequency, Field, 1), "14 GHz/T"}, {575e8, Per(Frequency, Field, 2), "575 Hz/G^2"}, {2, Per(Angle, Time, 1), "2 rad/s"},
		{3e-3, Per(Frequency, Intensity, 1), "3 mHz/(W/m^2)"}, {2e6, Per(Rate, Field, 1), "2 (1/us)/T"}, {3, Per(One, Time, 1), "3 1/s"},
	} {
		assert.Equal(t, c.want, Format(c.v, c.d), "%v %s", c.v, c.d.Name())
	}
}

func TestDimension(t *testing.T) {
	for d, want := range map[Dimension][2]string{
		One: {"1", "number"}, Time: {"s", "time"}, Frequency: {"Hz", "frequency"}, Rate: {"1/s", "rate"}, Angle: {"rad", "angle"},
		Field: {"T", "magnetic field"}, Power: {"W", "power"}, Intensity: {"W/m^2", "intensity"}, Length: {"m", "length"},
		Temperature: {"K", "temperature"}, Mass: {"kg", "mass"}, Velocity: {"m/s", "velocity"}, Voltage: {"V", "voltage"},
		Current: {"A", "current"}, Pressure: {"Pa", "pressure"},
		Per(Frequency, Field, 2):     {"Hz/T^2", "frequency per magnetic field^2"},
		Per(Frequency, Intensity, 1): {"Hz/(W/m^2)", "frequency per intensity"},
	} {
		assert.Equal(t, want, [2]string{d.Unit(), d.Name()})
	}
	assert.Equal(t, One, Dimension{})
	assert.Equal(t, Frequency, Per(Frequency, One, 2))
	assert.Equal(t, Per(Frequency, Field, 1), Per(Frequency, Field, 1))
	assert.Panics(t, func() { Per(Per(Frequency, Field, 1), Time, 1) })
	assert.Panics(t, func() { Per(Frequency, Per(Frequency, Field, 1), 1) })
	assert.Panics(t, func() { Per(Frequency, Field, 0) })
}

// dimensions lists the plain ones and quotients of all pairs.
func dimensions() []Dimension {
	all := append([]Dimension(nil), plain...)
	for _, num := range plain {
		for _, den := range plain[1:] {
			all = append(all, Per(num, den, 1), Per(num, den, 2))
		}
	}
	return all
}

// Every example in a message and every unit in a list can be read.
func TestAdviceCanBeFollowed(t *testing.T) {
	for _, d := range dimensions() {
		_, err := Parse(d.example(), d)
		assert.NoError(t, err, d.example())
		for _, u := range strings.Split(strings.TrimSuffix(d.listUnits(), " and the like"), ", ") {
			_, err := Parse("1 "+u, d)
			assert.NoError(t, err, "%s: %s", d.Name(), u)
		}
	}
	for word, name := range otherNames {
		assert.NotNil(t, findUnit(name), word)
	}
}

func roundTrip(t *testing.T, v float64, d Dimension) {
	text := Format(v, d)
	back, err := Parse(text, d)
	require.NoError(t, err, "%s", text)
	require.Equal(t, math.Float64bits(v), math.Float64bits(back), "%v became %q, read as %v", v, text, back)
}

func TestRoundTrip(t *testing.T) {
	values := []float64{0, math.Copysign(0, -1), 1, -1, 0.1, 1. / 3, 3e-6, 9.999999999999999e-7, 1e-6, 1.0000000000000002e-6, 999.9999999999999,
		math.Pi, math.Pi / 3, math.Nextafter(math.Pi/2, 4), 1.66053906892e-27, 1.44316060e-25, 5e-324, 2.2250738585072014e-308,
		math.MaxFloat64, -math.MaxFloat64, math.Inf(1), math.Inf(-1), 1 << 53, 123456789.123456789}
	for e := -320; e <= 300; e += 7 {
		values = append(values, 1.2345678901234567*math.Pow(10, float64(e)))
	}
	for _, d := range dimensions() {
		for _, v := range values {
			roundTrip(t, v, d)
		}
	}
}

// A text that is read has a value that survives being written and read again,
// for each dimension; whatever the bytes, nothing panics.
func FuzzParse(f *testing.F) {
	for i, s := range []string{"12.5 kHz", "3 us", "0.5 pi", "90 deg", "575 Hz/G^2", "5 %", "inf s", "-0 s", "1_0e-3 u", "10 rad/s", "10 1/s",
		"3 Hz/(mW/cm^2)", "2 (1/us)/G", "", " ", "1e99999 s", "3us", "/", "1 (", "5 µs", "\xff 1", "1 )("} {
		f.Add(s, uint8(i), uint8(i/2), uint8(1+i%3))
	}
	f.Fuzz(func(t *testing.T, text string, num, den, power uint8) {
		d := plain[int(num)%len(plain)]
		if den != 0 && power != 0 {
			d = Per(d, plain[int(den)%len(plain)], 1+int(power)%4)
		}
		v, err := Parse(text, d)
		if err != nil {
			require.NotEmpty(t, err.Error())
			return
		}
		require.False(t, math.IsNaN(v))
		roundTrip(t, v, d)
	})
}

// Random bits as values.
func FuzzFormat(f *testing.F) {
	f.Add(uint64(0x3ff0000000000000), uint8(1), uint8(0), uint8(1))
	f.Add(uint64(1), uint8(4), uint8(0), uint8(0))
	f.Add(uint64(0x400921fb54442d18), uint8(4), uint8(5), uint8(2))
	f.Fuzz(func(t *testing.T, bits uint64, num, den, power uint8) {
		d := plain[int(num)%len(plain)]
		if den != 0 && power != 0 {
			d = Per(d, plain[int(den)%len(plain)], 1+int(power)%4)
		}
		if v := math.Float64frombits(bits); !math.IsNaN(v) {
			roundTrip(t, v, d)
		}
	})
}
