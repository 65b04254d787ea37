// Package accept judges parts against limits: pass, fail or undecided, with
// the probability of conformity, after JCGM 106:2012 (The role of measurement
// uncertainty in conformity assessment), and lots by an acceptance number with
// its operating characteristic.
package accept
