package ingest

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
)

// A header `frequency,magnitude,phase` is read as that of an impedance if the
// values bear it out, which is said, and refused if they are those of a
// reflection.
func TestPresumedImpedance(t *testing.T) {
	table := func(quantity func(z complex128) complex128) string {
		var b strings.Builder
		b.WriteString("frequency,magnitude,phase\n")
		for i := range 60 {
			f := math.Pow(10, 2+5*float64(i)/59)
			w := 2 * math.Pi * f
			v := quantity(complex(0.02, w*5e-9-1/(w*10e-6)))
			fmt.Fprintf(&b, "%.9g,%.9g,%.6g\n", f, cmplx.Abs(v), cmplx.Phase(v)*180/math.Pi)
		}
		return b.String()
	}
	sweeps, err := Read("z.csv", strings.NewReader(table(func(z complex128) complex128 { return z })), nil)
	if err != nil {
		t.Fatal(err)
	}
	w := 2 * math.Pi * 100.0
	if want := complex(0.02, w*5e-9-1/(w*10e-6)); !(cmplx.Abs(sweeps[0].Z[0]-want) < 1e-6*cmplx.Abs(want)) {
		t.Errorf("Z = %v, want %v", sweeps[0].Z[0], want)
	}
	assumed := false
	for _, w := range sweeps[0].Warnings {
		assumed = assumed || w.Code == WarnUnitAssumed && strings.Contains(w.Text, "Ω")
	}
	if !assumed {
		t.Errorf("that ohms were assumed is not said: %v", sweeps[0].Warnings)
	}
	for name, quantity := range map[string]func(z complex128) complex128{
		"reflection": func(z complex128) complex128 { return (z - 50) / (z + 50) },
	} {
		_, err := Read(name+".csv", strings.NewReader(table(quantity)), nil)
		var e *Error
		if !errors.As(err, &e) || !errors.Is(err, ErrAmbiguous) || !strings.Contains(e.Hint, "--columns") {
			t.Errorf("%s: error %v, want an ambiguous reading with --columns", name, err)
		}
	}
}
