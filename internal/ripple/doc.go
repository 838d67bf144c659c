// Package ripple knows how unevenly a shaft runs within a turn: as measured with a toothed wheel, or as computed from
// the torque of all throws.
//
// It needs: turns with the pressure of every working end, and the rotating inertia (Torque, Book); or frames of a
// toothed wheel (Survey).
// It waits: for one turn at each load step, until a computed ripple is used; for LeastTurns turns, until a measured
// one is trusted.
// It emits: the harmonics of w = mean·(1 + Σ aₙ cos(nθ − pₙ)), θ in degrees after the phase mark, with the angle
// uncertainty that is left.
// When it cannot (a pressure missing or not sound, no inertia, too few teeth): no harmonics, and why.
//
// A computed ripple holds only what the throws of this machine do to a stiff shaft of the stated inertia. What a
// driver, a torsional resonance or another machine on the shaft does is not in it. It is used where nobody has
// measured the ripple, and never fitted to the pressures' own straightness (windows.md section 1: that was tried and
// made half of the machines worse).
package ripple
