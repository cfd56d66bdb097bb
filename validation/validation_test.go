package validation_test

import (
	"testing"
	"unicode/utf8"

	"github.com/stretchr/testify/assert"

	"rhotrace/validation"
)

func TestChecks(t *testing.T) {
	list := validation.Checks()
	assert.GreaterOrEqual(t, len(list), 35)
	names := map[string]bool{}
	for _, c := range list {
		t.Run(c.Name, func(t *testing.T) {
			assert.NotEmpty(t, c.Why)
			assert.NotEmpty(t, c.Source)
			assert.Contains(t, []validation.Status{validation.Recomputed, validation.Memory}, c.Status)
			assert.LessOrEqual(t, utf8.RuneCountInString(c.Name), 33, "longer than its column")
			assert.LessOrEqual(t, utf8.RuneCountInString(c.Source), 37, "longer than its column")
			o := c.Run(t.Context())
			assert.NoError(t, o.Err)
			assert.True(t, o.Passed, "found %.15g, expected %.15g, difference %.2g, allowed %.2g", o.Value, c.Expected, o.Value-c.Expected, c.Tolerance)
			for _, sign := range []float64{-1, 1} {
				wrong := c
				wrong.Expected += 2.5 * sign * c.Tolerance
				assert.False(t, wrong.Agrees(o.Value), "a wrong expected value passes")
			}
		})
		assert.False(t, names[c.Name], "two checks are named %q", c.Name)
		names[c.Name] = true
	}
}

func TestWrongValueFails(t *testing.T) {
	c := validation.Checks()[0]
	c.Expected++
	o := c.Run(t.Context())
	assert.NoError(t, o.Err)
	assert.False(t, o.Passed)
}
