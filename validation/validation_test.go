package validation_test

import (
	"testing"

	"github.com/stretchr/testify/assert"

	"rhotrace/validation"
)

func TestChecks(t *testing.T) {
	list := validation.Checks()
	assert.GreaterOrEqual(t, len(list), 35)
	names := map[string]bool{}
	for _, c := range list {
		t.Run(c.Name, func(t *testing.T) {
			assert.NotEmpty(t, c.Source)
			assert.NotEmpty(t, c.Why)
			o := c.Run(t.Context())
			assert.NoError(t, o.Err)
			assert.True(t, o.Passed, "found %.15g, expected %.15g, difference %.2g, allowed %.2g", o.Value, c.Expected, o.Value-c.Expected, c.Tolerance)
			// A wrong value must not pass.
			c.Expected += 2*c.Tolerance + 1e-300
			assert.False(t, c.Run(t.Context()).Passed, "the check cannot fail")
		})
		names[c.Name+c.Source] = true
	}
	assert.GreaterOrEqual(t, len(names), len(list)-3, "checks of one name")
}
