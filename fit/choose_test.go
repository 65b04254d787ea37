package fit

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"realpart/models"
)

// Simulated parts whose every element is clearly visible: the true circuit is
// chosen in at least 98 % of seeded cases over all kinds, with nothing given.
func TestChoice(t *testing.T) {
	const cases = 1000
	var names []string
	for _, kind := range models.Kinds() {
		for _, m := range models.OfKind(kind) {
			names = append(names, m.Name)
		}
	}
	type outcome struct{ truth, chosen string }
	type result struct {
		outcome
		why string
		err error
	}
	confusion := map[outcome]int{}
	right := 0
	err := InOrder(context.Background(), cases, 0, func(i int) (got result) {
		r := rand.New(rand.NewPCG(uint64(i), 2))
		p := simulatePart(r, names[i%len(names)], 201, 0.001)
		a, err := Analyse(p.freq, p.z, Request{})
		got.truth, got.err = p.name, err
		if err == nil {
			got.chosen, got.why = a.Name, a.KindReason
		}
		return got
	}, func(i int, got result) error {
		if got.err != nil {
			return fmt.Errorf("%s, seed %d: %w", got.truth, i, got.err)
		}
		if got.chosen == got.truth {
			right++
		} else {
			t.Logf("seed %d: %s taken for %s (%s)", i, got.truth, got.chosen, got.why)
		}
		confusion[got.outcome]++
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	var rows []string
	for o, n := range confusion {
		rows = append(rows, fmt.Sprintf("%-15s chosen %-15s %4d", o.truth, o.chosen, n))
	}
	slices.Sort(rows)
	t.Logf("confusion table, %d cases:\n%s", cases, strings.Join(rows, "\n"))
	t.Logf("true circuit chosen in %d of %d", right, cases)
	if share := float64(right) / cases; !(share >= 0.98) {
		t.Errorf("true circuit chosen in %.1f %% of cases, want at least 98 %%", 100*share)
	}
}
