// Package derating takes fitted parts to a ripple current: what it heats them,
// how far they are from limits, and how much more they would take.
//
// [ParseRipple], [NewLines], [NewWaveform] and [NewSampled] make a [Spectrum];
// [Assess] takes fitted sweeps, a spectrum and [Conditions] to an
// [Assessment], plain data with the schema realpart.derate/1.
// [Assessment.WriteText] and [Assessment.WriteJSON] are views of it.
//
// The loss is P = Σ I_k²·R(f_k), R the real part of the fitted impedance; its
// interval carries the covariance of the fit, since the resistances at two
// frequencies come from the same parameters. The rise is ΔT = P·R_th. For a lot
// the resistance is the upper one-sided tolerance bound at each frequency. The
// package never invents a limit: what the user did not give is not judged.
package derating
