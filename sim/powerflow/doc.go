// Package powerflow solves the nodal equations of a network at one instant,
//
//	Y·V = I(V)
//
// with ideal regulators and switches taken in exactly. The voltages that a coupling
// (network.Coupling) ties to others are written in terms of the independent ones,
// V = T·x, and the currents are gathered the same way, so that
//
//	Tᵀ·Y·T·x = Tᵀ·I(T·x)
//
// is left for the independent voltages x: a sparse, symmetric, complex system. It
// is factored once for each device state as L·D·Lᵀ and used in the fixed-point
// iteration x ← (TᵀYT)⁻¹·TᵀI(T·x); where that is slow, Newton's method on the same
// pattern takes over.
//
// The package knows no device: an Injection is a power that depends on a voltage.
package powerflow
