// Package lots says what the fits of many parts mean together: the statistics
// of a lot figure by figure, and whether one lot is like another.
//
// A lot is a name and the records of its parts. [New] collects its figures
// (parameters, self-resonance, figures at frequencies), [Lot.Summaries] gives
// their statistics, and [Compare] tests lots against the first. The words and
// tables for people are views of the same data: [Comparison.WriteText],
// [Lot.WriteText].
//
// The statistics are usable on their own, on plain slices: [Summarise],
// [AndersonDarling], [Grubbs], [GeneralisedESD], [ToleranceOneSided],
// [ToleranceTwoSided], [Welch], [BrownForsythe], [MannWhitney],
// [Equivalence], [Holm], [Detectable]. None changes its arguments, and all
// give the same bits whatever the order of the values.
package lots
