// Package lindblad propagates density matrices under a generator of Lindblad
// form,
//
//	dρ/dt = −i[H, ρ] + Σ cρc† − ½{c†c, ρ},
//
// together with slopes of the state along any number of directions.
//
// # What stands where
//
// coordinates.go: ρ as N² real numbers, an isometry. pieces.go, columns.go: the
// generator as fixed real pieces L_k with coefficients, dx/dt = Σ c_k(t) L_k x.
// layout.go, ordering.go: the coordinates that can be reached, one sparsity
// pattern, blocks in an order that keeps propagators triangular or narrow.
// sequence.go: what is played. run.go: playing it, sample by sample. choice.go:
// which method carries a stretch. exponential.go, dense.go, products.go:
// propagators of constant stretches; memory.go remembers them; groups.go
// repeats groups by powers; period.go uses the period of turning drives.
// shaped.go, taylor.go, twopoint.go, hermite.go: stretches that depend on time.
// steady.go: the state that an order leads to. positivity.go: the watch.
//
// # What is guaranteed by what
//
// Hermiticity: by the coordinates, which are real numbers of a Hermitian matrix.
//
// Trace: every piece conserves it, propagators are kept with columns that sum to
// zero (Q = P − 1), steps in time restore the sum of the populations, so what is
// left is rounding (some 1e-15, measured).
//
// Positivity: the exact map of a constant stretch is completely positive; what
// rounding can do to it is added up, and the state is checked before it could
// leave the cone by 1e-12 (Cholesky of ρ + 1e-13). States between steps in time
// are checked at every output, because no series is completely positive. A state
// outside is replaced by the nearest density matrix, and counted in Stats: no
// output has a population or an eigenvalue below −1e-12.
//
// Accuracy: Settings.Accuracy bounds the true error of every element of every
// output. Constant stretches are exact to rounding, about 1e-16·‖L‖t and less.
// Elsewhere the errors of all steps together stay below what was asked, since
// the map contracts; the two-point series carries its estimated error along and
// uses that it decays. Where rounding errs by more than was asked, there is a
// warning.
//
// Slopes: of propagators by products of pairs (A, E)(B, F) = (AB, AF + EB),
// elsewhere by the tangent equation x_j' = L x_j + (∂_j L) x beside the state.
// They are as accurate as the state, relative to their own size.
//
// The same input gives the same bits, whatever a Memory holds and whatever other
// goroutines do.
package lindblad
