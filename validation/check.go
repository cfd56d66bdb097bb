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
	Name      string // at most 33 characters, so that a check fits a line
	Source    string // at most 37 characters, journals abbreviated
	Status    Status
	Expected  float64
	Tolerance float64 // largest difference allowed
	Why       string  // reason of the tolerance
	Found     func(ctx context.Context) (float64, error)
}

// Status says how the expected value is known.
type Status string

const (
	// Recomputed: the formula or procedure of the source, evaluated by an
	// independent program that confirmed it against the equations of motion.
	Recomputed Status = "recomputed"
	// Memory: the formula of the source, quoted from memory.
	Memory Status = "from memory"
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
	return Outcome{Check: c, Value: v, Err: err, Passed: err == nil && c.Agrees(v)}
}

// Agrees tells whether a value found is near enough to the one expected; NaN is
// not.
func (c Check) Agrees(found float64) bool { return math.Abs(found-c.Expected) <= c.Tolerance }

// Checks lists all checks.
func Checks() []Check {
	var list []Check
	for _, group := range [][]Check{
		rabi(), damping(), steady(), shifts(), ramsey(), composite(), counting(),
		lambda(), beats(), adiabatic(), motion(), cavity(), vectors(), vectorFiles(),
	} {
		list = append(list, group...)
	}
	return list
}

const (
	asked   = "the default accuracy, 1e-8 on any element of ρ"
	direct  = "a direct solution, rounding only"
	printed = "the digits printed"
)

// hz writes an angular frequency in rad/µs as the ordinary frequency of a file.
func hz(angular float64) string { return fmt.Sprintf("%.17g MHz", angular/(2*math.Pi)) }

func us(t float64) string { return fmt.Sprintf("%.17g us", t) }

func perUs(rate float64) string { return fmt.Sprintf("%.17g /us", rate) }
