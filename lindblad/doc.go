// Package lindblad propagates density matrices under a generator of Lindblad
// form,
//
//	dρ/dt = −i[H, ρ] + Σ cρc† − ½{c†c, ρ},
//
// written as dx/dt = Σ_k c_k(t) L_k x for real coordinates x of ρ and fixed
// sparse real matrices L_k, the pieces.
package lindblad
