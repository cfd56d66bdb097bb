// Package ode integrates dy/dt = f(t, y) over []float64 with adaptive explicit
// Runge–Kutta methods. It knows no physics.
//
// Read in this order: tableau.go, the methods as exact data; step.go, the one
// loop over stages; control.go, the size of a step; solve.go, from one time to
// the last; dense.go, states within a step.
//
// Only the estimated error of a step is controlled, as an absolute bound. What
// that means for the true error depends on the problem; see Settings.PerTime.
// The methods are explicit: a stiff problem costs many steps but goes through.
//
// The same input gives the same bits.
package ode
