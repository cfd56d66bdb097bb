// Package models says what a laboratory has (levels, drives, decays,
// dephasings, shifts) in terms of the pieces of a generator.
//
// A Model is the unchanging part: which levels exist and what connects them.
// Its pieces are laid out once. Settings are the numbers of one stretch of
// time; they are dual numbers, so that one formula gives each coefficient of
// the generator and its slope with respect to a dial.
//
// Settings are in SI units with ordinary frequencies (Hz). This package is the
// only place where 2π enters: Hamiltonians and rates handed on are angular.
//
// # Conventions
//
// The field of a drive is cos(2πνt + φ), its detuning is ν − ν_transition. In
// the frame of the drives
//
//	H/ħ = −Δ|e⟩⟨e| + (Ω/2)(e^{−iφ}|e⟩⟨g| + h.c.),  Δ, Ω angular.
//
// A decay of rate Γ is the jump operator √Γ |to⟩⟨from|. A dephasing of time Tφ
// makes ρ_ab decay at the rate (w_a − w_b)²/Tφ.
package models
