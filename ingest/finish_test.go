package ingest

import (
	"cmp"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// The order is that of a stable sort of the standard library.
func TestSortedOrder(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		value := rapid.OneOf(rapid.SampledFrom([]float64{1, 2, 3, 4, 5, math.NaN(), math.Inf(1), 0, math.Copysign(0, -1)}), rapid.Float64())
		v := rapid.SliceOfN(value, 0, 40).Draw(t, "v")
		switch rapid.IntRange(0, 3).Draw(t, "kind") {
		case 0:
			slices.Sort(v)
		case 1:
			slices.Sort(v)
			slices.Reverse(v)
		case 2:
			v = append(v, v...)
		}
		want := make([]int, len(v))
		for i := range want {
			want[i] = i
		}
		slices.SortStableFunc(want, func(a, b int) int { return cmp.Compare(v[a], v[b]) })
		if got := sortedOrder(v); !slices.Equal(got, want) {
			t.Fatalf("%v: %v, want %v", v, got, want)
		}
	})
}
