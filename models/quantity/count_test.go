package quantity

import "testing"

func TestCount(t *testing.T) {
	for n, want := range map[int]string{0: "0 points", 1: "1 point", 2: "2 points"} {
		if got := Count(n, "point"); got != want {
			t.Errorf("Count(%d) = %q, want %q", n, got, want)
		}
	}
}
