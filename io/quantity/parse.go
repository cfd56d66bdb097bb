package quantity

import (
	"errors"
	"fmt"
	"math"
	"math/big"
	"regexp"
	"strconv"
	"strings"
	"unicode"

	"rhotrace/io/spelling"
)

// Parse reads a number and a unit with a space between them, as in "12.5 kHz",
// and returns the value in SI units. The number follows TOML (sign, decimal
// point between digits, exponent, underscores between digits). A number without
// dimension stands alone or with %. "inf" is read, with a unit where the
// dimension has one; a caller that allows no infinite value refuses it. "µ" and
// "μ" are read as u.
//
// The value is the float64 nearest to what is written: the power of ten of the
// unit joins the number's exponent before rounding ("3 us" has the bits of
// 3e-6), and other factors are multiplied exactly.
//
// Errors say what is wrong and what to write; the caller adds the place.
func Parse(text string, d Dimension) (float64, error) {
	text = strings.NewReplacer("µ", "u", "μ", "u").Replace(strings.TrimSpace(text))
	if text == "" {
		return 0, fmt.Errorf("the text is empty; write %s, for example %q", d.a(), d.example())
	}
	at := strings.IndexFunc(text, unicode.IsSpace)
	if at < 0 {
		return d.parseAlone(text)
	}
	digits, name := text[:at], strings.TrimSpace(text[at:])
	if !isNumber(digits) {
		return 0, fmt.Errorf("%q: %q is not a number%s; write for example %q", text, digits, hint(digits), d.example())
	}
	u, err := d.unit(name)
	if err != nil {
		return 0, fmt.Errorf("%q: %w", text, err)
	}
	return u.value(text, digits)
}

// parseAlone reads a text without a space: a bare number, or a number and a
// unit run together.
func (d Dimension) parseAlone(text string) (float64, error) {
	if isNumber(text) {
		if d != One {
			return 0, fmt.Errorf("%q needs a unit: it is %s, so write for example %q", text, d.a(), text+" "+d.usual())
		}
		return unit{}.value(text, text)
	}
	if front := leadingNumber.FindString(text); front != "" {
		return 0, fmt.Errorf("%q: put a space between number and unit, as in %q", text, front+" "+text[len(front):])
	}
	return 0, fmt.Errorf("%q is not %s%s; write for example %q", text, d.a(), hint(text), d.example())
}

// The decimal numbers of TOML 1.0: no leading zeros, digits on both sides of
// the point, single underscores between digits.
const digitGroups = `[0-9](?:_?[0-9])*`

var (
	wholeNumber   = regexp.MustCompile(`^[+-]?(?:inf|(?:0|[1-9](?:_?[0-9])*)(?:\.` + digitGroups + `)?(?:[eE][+-]?` + digitGroups + `)?)$`)
	leadingNumber = regexp.MustCompile(`^[+-]?[0-9]+(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?`)
	leadingZeros  = regexp.MustCompile(`^[+-]?0+[0-9_]`)
)

func isNumber(s string) bool { return wholeNumber.MatchString(s) }

// hint says what about a text that is no number can be told from its look.
func hint(s string) string {
	switch {
	case strings.Contains(s, ","):
		return " (decimals follow a point)"
	case strings.HasPrefix(strings.TrimLeft(s, "+-"), "."), strings.HasSuffix(s, "."):
		return " (digits stand on both sides of the point)"
	case leadingZeros.MatchString(s):
		return " (leave out the zeros in front)"
	}
	return ""
}

// unit finds the unit of that name, or why it does not fit.
func (d Dimension) unit(name string) (unit, error) {
	if d.power > 0 {
		return d.quotientUnit(name)
	}
	if u := findUnit(name); u != nil && u.of == d.base {
		return *u, nil
	}
	return unit{}, d.refuse(name)
}

// quotientUnit reads "kHz/G^2" by trying each stroke as the one of the
// quotient; only one can give the right dimension.
func (d Dimension) quotientUnit(name string) (unit, error) {
	tail := ""
	if d.power > 1 {
		tail = "^" + strconv.Itoa(d.power)
	}
	front, fits := strings.CutSuffix(name, tail)
	for i := 0; fits && i < len(front); i++ {
		if front[i] != '/' {
			continue
		}
		over, under := findPart(front[:i], d.base), findPart(front[i+1:], d.per)
		if over != nil && under != nil {
			return over.over(under, d.power), nil
		}
	}
	return unit{}, d.refuse(name)
}

// over is the unit u/v^power.
func (u *unit) over(v *unit, power int) unit {
	q := unit{exponent: u.exponent - power*v.exponent, factor: u.factor}
	if v.factor == nil {
		return q
	}
	q.factor = big.NewRat(1, 1)
	if u.factor != nil {
		q.factor.Set(u.factor)
	}
	for range power {
		q.factor.Quo(q.factor, v.factor)
	}
	return q
}

var (
	angular  = regexp.MustCompile(`(?i)rad(ians?)? ?(/|per |[·*]? ?[mun]?s ?(\^-1|⁻¹|-1))`)
	inverted = regexp.MustCompile(`^1 ?/|[a-z] ?(\^-1|⁻¹|-1)$|^per `)
)

// refuse says why a unit does not fit and which does.
func (d Dimension) refuse(name string) error {
	switch {
	case angular.MatchString(name):
		if d == Rate {
			return errors.New("a rate is written in /s, /ms or /us, without rad; a linewidth in Hz is the rate divided by 2π")
		}
		return errors.New("angular frequencies are not written in files: divide by 2π and write Hz, kHz or MHz (a rate Γ goes undivided, in /s or /us)")
	case inverted.MatchString(name) && d == Rate:
		return errors.New("write a rate Γ with a stroke and no one, as in \"5 /s\" or \"5 /us\"; it is 2π times a linewidth in Hz")
	case inverted.MatchString(name) && d.power == 0:
		return errors.New("an ordinary frequency is written in Hz, kHz or MHz, a rate Γ in /s or /us; they differ by 2π")
	}
	fitting := fmt.Sprintf("%s is wanted here (%s)", d.a(), d.listUnits())
	if u := findUnit(name); u != nil {
		if d == Rate && u.of == frequency || d == Frequency && u.of == rate {
			fitting += "; a rate in /s is 2π times a linewidth in Hz"
		}
		return fmt.Errorf("%s is a unit of %s; %s", name, words[u.of], fitting)
	}
	if near := d.nearUnits(name); len(near) > 0 {
		return fmt.Errorf("there is no unit %q; did you mean %s? %s", name, strings.Join(near, " or "), fitting)
	}
	return fmt.Errorf("there is no unit %q; %s", name, fitting)
}

// nearUnits lists the units of the dimension that a misspelt one may mean.
func (d Dimension) nearUnits(name string) []string {
	if d.power > 0 {
		return nil
	}
	known := d.base.units()
	joined := strings.Join(strings.Fields(name), "")
	lower := strings.ToLower(joined)
	for _, word := range []string{lower, strings.TrimSuffix(lower, "s")} {
		if meant, ok := otherNames[word]; ok && findUnit(meant).of == d.base {
			return []string{meant}
		}
	}
	var same []string
	for _, k := range known {
		if strings.EqualFold(k, joined) {
			same = append(same, k)
		}
	}
	if same != nil {
		return same
	}
	return spelling.Near(joined, known)
}

// mostDigits bounds the work on a number; the longest exact float64 has 767.
const mostDigits = 1000

// value is digits × factor × 10^exponent, rounded once.
func (u unit) value(text, digits string) (float64, error) {
	digits = strings.ReplaceAll(digits, "_", "")
	if strings.HasSuffix(digits, "inf") {
		if digits[0] == '-' {
			return math.Inf(-1), nil
		}
		return math.Inf(1), nil
	}
	if len(digits) > mostDigits {
		return 0, fmt.Errorf("a number of %d characters is too long; 17 digits are all that count", len(digits))
	}
	mantissa, power, _ := strings.Cut(strings.ToLower(digits), "e")
	e := 0
	if power != "" {
		var err error
		if e, err = strconv.Atoi(power); err != nil || e > 1e6 || e < -1e6 {
			return 0, outOfRange(text)
		}
	}
	decimal := mantissa + "e" + strconv.Itoa(e+u.exponent)
	v, err := strconv.ParseFloat(decimal, 64)
	if err != nil || v == 0 && strings.ContainsAny(mantissa, "123456789") {
		return 0, outOfRange(text)
	}
	if u.factor == nil || v == 0 {
		return v, nil
	}
	exact := rational(decimal)
	v, _ = exact.Mul(exact, u.factor).Float64()
	if math.IsInf(v, 0) || v == 0 {
		return 0, outOfRange(text)
	}
	return v, nil
}

func outOfRange(text string) error {
	return fmt.Errorf("%q is beyond what can be computed with; the size of a value in SI units lies between 1e-323 and 1e308", text)
}
