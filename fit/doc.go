// Package fit finds the values of an equivalent circuit from an impedance
// sweep by nonlinear least squares, and says how far they can be trusted.
//
// A fit goes through these steps:
//
//  1. The sweep, frequencies in Hz and impedances in Ω, is weighed point by
//     point (weight.go). The standard residual is ρ = ln(Z_model/Z_measured):
//     its real part is the relative error of |Z|, its imaginary part the
//     phase error in radians, which is how a meter's data sheet states its
//     accuracy.
//  2. Starting values are found from the sweep without help (start.go).
//  3. The solver of package fit/lm minimises Σ|ρ|² over ln p of every
//     parameter, logit n for exponents (problem.go).
//  4. Uncertainties follow from the Jacobian at the solution, those from
//     scatter and those from the meter kept apart (uncertainty.go), and are
//     carried on to figures and self-resonances (figures.go).
//
// [Fit] does all of it for one circuit. The package knows nothing of files or
// pages; frequencies and impedances are plain slices.
package fit
