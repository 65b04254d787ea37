// Package lm solves nonlinear least-squares problems by the method of Levenberg and Marquardt with a trust region.
//
// A problem is a function r: Rⁿ → Rᵐ of residuals, m ≥ n, with or without its Jacobian J. [Solve] looks for the x that
// minimises the cost ½‖r(x)‖². The package knows nothing of what the residuals mean.
//
// One round of the solve, after J. J. Moré, The Levenberg–Marquardt algorithm: implementation and theory, in: Numerical
// Analysis, Dundee 1977, Springer LNM 630 (1978) 105:
//
//  1. J is factorised, J = Q·R. From here on everything is n×n: R and Qᵀr stand for J and r.
//  2. The variables are scaled by the diagonal D of the greatest column norms of J so far, which makes the solve
//     independent of their units; or not at all, if they are logarithms ([Settings].UnitScaling).
//  3. The singular values of R·D⁻¹ turn the damped step p = −(JᵀJ + λD²)⁻¹Jᵀr into a sum of n terms. λ is zero, or what
//     gives ‖D·p‖ the length of the trust region's radius. Another radius costs next to nothing.
//  4. The step is tried. If the cost falls as far as the linear model promised, the radius grows; if not, it shrinks; if
//     the cost does not fall at all, the step is refused and a shorter one tried.
//  5. The solve ends when the residuals are orthogonal to the columns of J, when a full step changes nothing, when it
//     gains nothing, or when rounding is all that is left. All tests are relative. [Result].Reason gives the number
//     that was compared, and the threshold.
//
// Bounds are kept by an active set: a variable at its bound whose gradient points outward is held, and a step that would
// cross a bound is solved again with the variable on it.
//
// [Covariance] gives the covariance matrix of the variables at the solution, or says which of them the data do not
// determine.
//
// The method finds a minimum, not the lowest one, and may end in a valley that runs to infinity: starts matter. The 27
// problems of the NIST Statistical Reference Datasets are solved from both published starts with the defaults, to 8
// digits or more; but from the far start of one of them, MGH10, at which the model is 10⁸ times too large, other first
// radii can lead away.
package lm
