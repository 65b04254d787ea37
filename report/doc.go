// Package report turns the analysis of a sweep into something to read or to
// hand on.
//
// A report is plain data first: [New] takes an analysis and makes a [Fit], the
// record with the schema realpart.fit/1, which holds every number and word
// that is said about a sweep. The rest are views of it: [WriteJSON],
// [WriteText], [WriteCSV]. Curves over frequency, which the record does not
// hold, are [Traces]; from them come the small plot of [Sketch] and the table
// of [WriteResiduals]. [DrawText] draws a circuit in characters.
//
// Pictures, the page and the netlist are made by the packages below this one:
// report/figure, report/schematic, report/page and report/netlist.
//
// Every number of a record is in SI base units and finite; a number that does
// not exist is absent. Text gives numbers with SI prefixes, rounded as GUM
// 7.2.6 asks: the uncertainty to two significant digits, the value to the same
// place.
package report
