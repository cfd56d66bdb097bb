// Package fit answers questions by running an experiment again and again:
// which values of its unknowns do measured traces support, and how well.
//
// The numeric core stands in files that know nothing of experiments:
// weighted nonlinear least squares (LeastSquares, Curve), what the curvature
// says about errors (errors.go, identify.go), tests of residuals
// (residuals.go, periodogram.go), models of counting (counting.go), rough
// values read from a trace (starting.go), and value(error) notation
// (notation.go).
package fit
