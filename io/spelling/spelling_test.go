package spelling

import (
	"testing"

	"github.com/stretchr/testify/assert"
)

// The counts follow from the definition by hand; "ca" to "abc" is the usual
// example in which the restricted form (3) differs from the full one (2).
func TestSlips(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{
		{"", "", 0}, {"a", "", 1}, {"", "abc", 3},
		{"kitten", "sitting", 3}, // V. I. Levenshtein's measure; the usual example
		{"rabi", "rabi", 0}, {"rabii", "rabi", 1}, {"rbai", "rabi", 1}, {"rapi", "rabi", 1},
		{"ca", "abc", 3}, {"détuning", "detuning", 1},
	} {
		assert.Equal(t, c.want, slips([]rune(c.a), []rune(c.b)), "%q %q", c.a, c.b)
		assert.Equal(t, c.want, slips([]rune(c.b), []rune(c.a)), "%q %q", c.b, c.a)
	}
}

func TestNear(t *testing.T) {
	keys := []string{"between", "rabi", "detuning", "phase", "linewidth", "lasts", "last", "list"}
	assert.Equal(t, []string{"detuning"}, Near("detunning", keys))
	assert.Equal(t, []string{"rabi"}, Near("Rabii", keys))
	assert.Equal(t, []string{"linewidth"}, Near("LINEWITDH", keys))
	assert.Equal(t, []string{"last", "lasts", "list"}, Near("last", keys), "nearest first, then in the order given")
	assert.Equal(t, []string{"a1", "a2", "a3"}, Near("a4", []string{"a1", "a2", "a3", "a5"}), "three at most")
	assert.Empty(t, Near("voltage", keys))
	assert.Empty(t, Near("x", keys), "one letter has nothing in common with another")
	assert.Empty(t, Near("", keys))
}
