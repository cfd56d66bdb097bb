package fit

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
)

// Published in this notation, where the first digit of the error is 1 (other
// errors are printed there with two digits, here with one): CODATA 2018, E.
// Tiesinga et al., Rev. Mod. Phys. 93, 025010 (2021).
func TestNotationOfConstants(t *testing.T) {
	assert.Equal(t, "6.67430(15)e-11", Notation(6.67430e-11, 0.00015e-11))
	// Printed there as 7.2973525693(11)e-3.
	assert.Equal(t, "0.0072973525693(11)", Notation(7.2973525693e-3, 0.0000000011e-3))
	// The same paper with two digits: 137.035999084(21), 9.1093837015(28)e-31.
	assert.Equal(t, "137.03599908(2)", Notation(137.035999084, 0.000000021))
	assert.Equal(t, "9.109383702(3)e-31", Notation(9.1093837015e-31, 0.0000000028e-31))
}

func TestNotation(t *testing.T) {
	for _, c := range []struct {
		value, err float64
		want       string
	}{
		{12.341, 0.052, "12.34(5)"},
		{12.341, 0.0123, "12.341(12)"},
		{12.345, 0.0096, "12.345(10)"}, // 0.0096 rounds to 0.010
		{12.346, 0.0196, "12.35(2)"},
		{12.346, 0.0194, "12.346(19)"},
		{12.345, 0.96, "12.3(10)"},
		{12.345, 0.94, "12.3(9)"},
		{12.3, 1.4, "12.3(14)"},
		{12.3, 4.4, "12(4)"},
		{123.4, 44, "1.2(4)e2"},
		{123.4, 14, "123(14)"},
		{12346, 67, "1.235(7)e4"},
		{-0.00312, 0.0004, "-0.0031(4)"},
		{0.00012346, 0.0000011, "1.235(11)e-4"},
		{0.003, 0.02, "0.00(2)"},
		{-0.003, 0.02, "0.00(2)"},
		{0, 0.02, "0.00(2)"},
		{0, 2e-9, "0(2)e-9"},
		{3, 5e7, "0(5)e7"},
		{99.96, 0.2, "100.0(2)"},
		{999.999e3, 100, "1.00000(10)e6"},
		{9.99996e-4, 2e-8, "0.00100000(2)"},
		{2.5, 0, "2.5"},
		{2.0 / 3, 0, "0.6666666667"},
		{2.0 / 3, math.Inf(1), "0.6667(inf)"},
		{2.0 / 3, math.NaN(), "0.6667(-)"},
		{math.NaN(), 1, "NaN"},
		{math.Inf(-1), 1, "-Inf"},
		{1e300, 1e299, "1.00(10)e300"},
		{5e-324, 5e-324, "5(5)e-324"},
		{1.5, -0.2, "1.5(2)"},
	} {
		assert.Equal(t, c.want, Notation(c.value, c.err), "%g ± %g", c.value, c.err)
	}
}
