package lots

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Grubbs returns the statistic of Grubbs' two-sided test for one outlier, the
// largest deviation from the mean in standard deviations, and its critical
// value at a significance level. The value farthest from the mean is an
// outlier if g > critical. Both are NaN for fewer than 3 values or if all are
// equal.
//
//	G = max|x − x̄|/s
//	critical = (n−1)/√n · √(t²/(n−2+t²)),  t upper α/(2n) of Student's t, ν = n−2
//
// Source: NIST/SEMATECH e-Handbook 1.3.5.17.1 (Grubbs 1969).
func Grubbs(values []float64, alpha float64) (g, critical float64) {
	g, _ = farthest(slices.Sorted(slices.Values(values)))
	return g, grubbsCritical(len(values), alpha/2)
}

// grubbsCritical is the one-sided critical value; a two-sided test halves
// alpha.
func grubbsCritical(n int, alpha float64) float64 {
	if n < 3 {
		return math.NaN()
	}
	nu := float64(n - 2)
	t := distuv.StudentsT{Sigma: 1, Nu: nu}.Quantile(1 - alpha/float64(n))
	return float64(n-1) / math.Sqrt(float64(n)) * math.Sqrt(t*t/(nu+t*t))
}

// farthest returns the largest deviation of sorted values from their mean in
// standard deviations, and its index; NaN if there is none.
func farthest(sorted []float64) (g float64, at int) {
	n := len(sorted)
	if n < 3 || sorted[0] == sorted[n-1] {
		return math.NaN(), 0
	}
	m, s := stat.MeanStdDev(sorted, nil)
	if sorted[n-1]-m >= m-sorted[0] {
		at = n - 1
	}
	return math.Abs(sorted[at]-m) / s, at
}

// mostOutliers is the number of outliers that are looked for in a sample.
// Below 15 values the critical values for more than one are not good (Rosner
// 1983), and Grubbs' test for one remains.
func mostOutliers(n int) int {
	switch {
	case n < 3:
		return 0
	case n < 15:
		return 1
	}
	return min(10, n/5)
}

// GeneralisedESD repeats Grubbs' test, the farthest value left out each time,
// up to most times, and returns the number of outliers: the last repetition
// that exceeds its critical value counts, so that two outliers cannot mask
// each other. The statistics and critical values of all repetitions come with
// it. For most = 1 it is Grubbs' test.
//
// Source: NIST/SEMATECH e-Handbook 1.3.5.17.3 (Rosner 1983).
func GeneralisedESD(values []float64, most int, alpha float64) (count int, statistic, critical []float64) {
	_, count, statistic, critical = generalisedESD(slices.Sorted(slices.Values(values)), most, alpha)
	return count, statistic, critical
}

// generalisedESD also returns the values in the order in which they were left
// out. It keeps the sorted slice as it is.
func generalisedESD(sorted []float64, most int, alpha float64) (removed []float64, count int, statistic, critical []float64) {
	rest := slices.Clone(sorted)
	for i := range most {
		g, at := farthest(rest)
		if math.IsNaN(g) {
			break
		}
		limit := grubbsCritical(len(rest), alpha/2)
		statistic, critical = append(statistic, g), append(critical, limit)
		removed = append(removed, rest[at])
		rest = slices.Delete(rest, at, at+1)
		if g > limit {
			count = i + 1
		}
	}
	return removed[:count], count, statistic, critical
}
