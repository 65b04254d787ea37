// Package models holds equivalent circuits of passive parts: the laws of the
// elements, the notation in which a circuit is written, the compiled
// evaluation of its impedance, and the library of named circuits.
//
// A circuit is written as an expression. `+` puts in series, `||` in
// parallel, brackets group, and `||` binds tighter than `+`:
//
//	ESR + ESL + (C || Rp)
//
// is a capacitor with its equivalent series resistance and inductance and an
// insulation resistance across the capacitance. [Parse] reads an expression,
// [Lookup] finds a circuit of the library by name.
//
// A circuit is compiled once, when it is parsed. [Circuit.NewEvaluator]
// evaluates it at a set of frequencies: [Evaluator.Jacobian] gives the
// impedance Z(jω) in ohms and all derivatives ∂Z/∂x in one pass up the tree and
// one pass down, where x is the unknown a fit works with: ln p for every
// parameter but an exponent, for which it is logit n = ln(n/(1−n)) (see
// [Scale]). Who evaluates many circuits at the frequencies of one sweep makes a
// [Grid] once, moves an evaluator from circuit to circuit with [Evaluator.Use],
// and takes [BlockSize] frequencies at a time with [Evaluator.Block].
//
// [Figures] and [Circuit.Resonances] turn the impedance into what data
// sheets state: ESR, C_s, L_s, D, Q, self-resonant frequencies.
//
// All values are in SI base units: Ω, H, F, Hz, s. The package knows nothing
// of files, fitting or pages, and can be used on its own.
package models
