// Package validation recomputes published results by the same path that users
// take. `rhotrace verify` prints the list, the tests run it.
package validation

import (
	"context"
	"fmt"
	"math"
)

// Check is one number that the literature, or an independent computation with
// more digits, says and that this program must find.
type Check struct {
	Name      string
	Source    string
	Status    Status
	Expected  float64
	Tolerance float64 // largest difference allowed
	Why       string  // reason of the tolerance
	Found     func(ctx context.Context) (float64, error)
}

// Status says how the expected value is known.
type Status string

const (
	// Formula: a closed form from the literature, evaluated to the digits given.
	Formula Status = "closed form"
	// Published: a number as printed in a publication or standard.
	Published Status = "published"
	// Vectors: an independent computation with 90 digits.
	Vectors Status = "90 digits"
	// Recomputed: a number found by an independent program, to the digits given.
	Recomputed Status = "recomputed"
)

// Outcome is a check with what was found.
type Outcome struct {
	Check
	Value  float64
	Err    error
	Passed bool
}

// Run carries out a check.
func (c Check) Run(ctx context.Context) Outcome {
	v, err := c.Found(ctx)
	return Outcome{Check: c, Value: v, Err: err, Passed: err == nil && math.Abs(v-c.Expected) <= c.Tolerance}
}

// Checks lists all checks.
func Checks() []Check {
	var list []Check
	for _, group := range [][]Check{rabi(), steady(), ramsey(), lambda(), adiabatic(), motion(), composite(), counting(), vectors()} {
		list = append(list, group...)
	}
	return list
}

const (
	asked   = "the default accuracy, 1e-8 on any element of ρ"
	printed = "the digits printed"
)

// hz writes an angular frequency in rad/µs as the ordinary frequency of a file.
func hz(angular float64) string { return fmt.Sprintf("%.17g MHz", angular/(2*math.Pi)) }

func us(t float64) string { return fmt.Sprintf("%.17g us", t) }

func perUs(rate float64) string { return fmt.Sprintf("%.17g /us", rate) }
