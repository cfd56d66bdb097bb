package figure

import (
	"math"
	"strconv"
	"strings"
)

// A tick is a mark along an axis; a minor one has no label.
type tick struct {
	at    float64 // in the numbers shown
	label string
}

// linearTicks marks multiples of 1, 2 or 5 times a power of ten, with at most
// that many steps between low and high, but two labels at least.
func linearTicks(low, high float64, steps int) []tick {
	for steps = max(steps, 1); ; steps++ {
		step, parts := niceStep((high - low) / float64(steps))
		if math.Floor(high/step+1e-9)-math.Ceil(low/step-1e-9) >= 1 {
			return marks(low, high, step, parts)
		}
	}
}

// niceStep returns the least step that is not below size, and into how many
// parts minor ticks divide it.
func niceStep(size float64) (step float64, parts int) {
	power := math.Pow10(int(math.Floor(math.Log10(size))))
	switch mantissa := size / power; {
	case mantissa <= 1+1e-9:
		return power, 5
	case mantissa <= 2+1e-9:
		return 2 * power, 4
	case mantissa <= 5+1e-9:
		return 5 * power, 5
	}
	return 10 * power, 5
}

func marks(low, high, step float64, parts int) []tick {
	var out []tick
	digits := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	minor := step / float64(parts)
	for k := math.Ceil(low/minor - 1e-9); k <= math.Floor(high/minor+1e-9); k++ {
		t := tick{at: k * minor}
		if math.Mod(k, float64(parts)) == 0 {
			t.at = k / float64(parts) * step
			t.label = number(t.at, digits)
		}
		out = append(out, t)
	}
	return out
}

// number prints with that many decimals and a proper minus sign.
func number(v float64, digits int) string {
	text := strconv.FormatFloat(v+0, 'f', digits, 64)
	if rest, negative := strings.CutPrefix(text, "-"); negative {
		if strings.Trim(rest, "0.") == "" {
			return rest
		}
		return "−" + rest
	}
	return text
}

// logTicks marks the powers of ten between low and high, with at most that many
// steps, and their multiples; where there are not two of them, it marks as
// linearTicks does.
func logTicks(low, high float64, steps int) []tick {
	first, last := int(math.Ceil(math.Log10(low)-1e-9)), int(math.Floor(math.Log10(high)+1e-9))
	if last-first < 1 {
		return linearTicks(low, high, steps)
	}
	stride := 1
	for (last-first)/stride > max(steps, 1) {
		stride++
	}
	plain := first >= -3 && last <= 4
	var out []tick
	for d := first - 1; d <= last; d++ {
		if d >= first && (d-first)%stride == 0 {
			t := tick{at: math.Pow10(d), label: "10" + superscript(strconv.Itoa(d))}
			if plain {
				t.label = number(t.at, max(0, -d))
			}
			out = append(out, t)
		} else if d >= first {
			out = append(out, tick{at: math.Pow10(d)})
		}
		if stride == 1 {
			for m := 2.0; m < 10; m++ {
				if at := m * math.Pow10(d); at >= low && at <= high {
					out = append(out, tick{at: at})
				}
			}
		}
	}
	return out
}
