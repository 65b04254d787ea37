package rational

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// checkLadder measures the ladder anew, on another grid than its own.
func checkLadder(t *testing.T, name string, n *Foster, target impedance, lo, hi, tol, realTol float64) {
	t.Helper()
	var e, er float64
	for _, f := range logSpaced(lo, hi, 3001) {
		z, want := n.At(f), target(f)
		if d := cmplx.Abs(z/want - 1); !(d <= e) {
			e = d
		}
		er = max(er, math.Abs(real(z)/real(want)-1))
	}
	t.Logf("%s: %v, %d sections, R0 %.3g, X0 %.3g, largest error %.2g (real part %.2g)", name, n.Kind, n.Sections(), n.R0, n.X0, n.MaxError, n.RealError)
	if !(n.MaxError <= tol) || !(e <= 1.002*tol) || !(n.RealError <= realTol) || !(er <= 1.002*realTol) {
		t.Errorf("%s: error stated %g, measured %g, want %g; real part %g, %g, want %g", name, n.MaxError, e, tol, n.RealError, er, realTol)
	}
	if !(math.Abs(e/n.MaxError-1) < 0.01) {
		t.Errorf("%s: error stated %g, measured %g", name, n.MaxError, e)
	}
	if !(n.R0 >= 0 && n.X0 >= 0) {
		t.Errorf("%s: negative R0 %g or X0 %g", name, n.R0, n.X0)
	}
	last := 0.0
	for k, r := range n.R {
		x := n.X[k]
		tau := r * x
		if n.Kind == SeriesRL || n.Kind == ParallelRL {
			tau = x / r
		}
		if !(r > 0) || !(x > 0) || !(tau > last) || math.IsInf(r, 0) || math.IsInf(x, 0) {
			t.Errorf("%s: section %d has R %g, X %g, time constant %g after %g", name, k, r, x, tau, last)
		}
		last = tau
	}
}

func TestLadders(t *testing.T) {
	inf := math.Inf(1)
	type row struct {
		name         string
		target       impedance
		lo, hi       float64
		tol, realTol float64
		kind         LadderKind
		most         int // sections; what was reached, to notice when it gets worse
	}
	var table []row
	for _, c := range []struct {
		n    float64
		most int
	}{{0.3, 12}, {0.5, 13}, {0.7, 12}, {0.9, 11}, {0.95, 10}} {
		table = append(table, row{fmt.Sprintf("CPE n = %g, six decades", c.n), cpe(1e-6, c.n), 10, 1e7, 1e-3, inf, SeriesRC, c.most})
	}
	for _, c := range []struct {
		tand float64
		most int
	}{{1e-4, 8}, {1e-3, 8}, {1e-2, 8}, {0.1, 9}, {0.3, 10}} {
		table = append(table, row{fmt.Sprintf("loss tangent %g, ESR to 1 %%", c.tand), lossy(1e-8, c.tand), 100, 1e7, 1e-3, 1e-2, SeriesRC, c.most})
	}
	table = append(table,
		row{"loss tangent 0.1, |Z| only", lossy(1e-8, 0.1), 100, 1e7, 1e-3, inf, SeriesRC, 9},
		row{"loss tangent 0.02, branches", lossy(1e-8, 0.02), 100, 1e7, 1e-3, 1e-2, ParallelRC, 9},
		row{"skin effect, six decades", skin(1e-3), 10, 1e7, 1e-3, inf, SeriesRL, 13},
		row{"skin effect, 1 %", skin(1e-3), 10, 1e7, 1e-2, inf, SeriesRL, 9},
		row{"skin effect, branches", skin(1e-3), 100, 1e7, 1e-3, inf, ParallelRL, 11},
	)
	for _, c := range []struct {
		rc   float64
		most int
	}{{1e-7, 1}, {1e-5, 5}, {1e-3, 8}, {1e-1, 11}} {
		table = append(table, row{fmt.Sprintf("RC line, RC = %g s", c.rc), rcLine(1, c.rc), 100, 1e7, 1e-3, inf, SeriesRC, c.most})
	}
	for _, c := range table {
		n, err := LadderReal(c.target, c.lo, c.hi, c.tol, c.realTol, c.kind)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		checkLadder(t, c.name, n, c.target, c.lo, c.hi, c.tol, c.realTol)
		if n.Sections() > c.most {
			t.Errorf("%s: %d sections, %d were enough", c.name, n.Sections(), c.most)
		}
	}
}

// A ladder of lumped elements is found with its own number of sections and its own values.
func TestLadderOfALadder(t *testing.T) {
	target := series(resistor(2), parallel(resistor(50), capacitance(1e-7)), parallel(resistor(10), capacitance(1e-9)), capacitance(1e-5))
	n, err := Ladder(target, 10, 1e8, 1e-7, SeriesRC)
	if err != nil {
		t.Fatal(err)
	}
	if n.Sections() != 2 {
		t.Fatalf("%d sections, want 2", n.Sections())
	}
	for _, c := range []struct{ got, want float64 }{{n.R0, 2}, {n.X0, 1e-5}, {n.R[0], 10}, {n.X[0], 1e-9}, {n.R[1], 50}, {n.X[1], 1e-7}} {
		if !(math.Abs(c.got/c.want-1) < 1e-5) {
			t.Errorf("got %g, want %g", c.got, c.want)
		}
	}
	// The duals: what is R-L in series and in parallel.
	for _, c := range []struct {
		kind   LadderKind
		target impedance
		r0, x0 float64
	}{
		{SeriesRL, series(resistor(1), inductance(1e-6), parallel(resistor(20), inductance(1e-4))), 1, 1e-6},
		{ParallelRC, parallel(resistor(1e6), capacitance(1e-9), series(resistor(1e4), capacitance(1e-9))), 1e6, 1e-9},
		{ParallelRL, parallel(resistor(1e4), inductance(1e-3), series(resistor(50), inductance(1e-3))), 1e4, 1e-3},
	} {
		n, err := Ladder(c.target, 10, 1e8, 1e-7, c.kind)
		if err != nil {
			t.Errorf("%v: %v", c.kind, err)
			continue
		}
		if n.Sections() != 1 || !(math.Abs(n.R0/c.r0-1) < 1e-4) || !(math.Abs(n.X0/c.x0-1) < 1e-4) {
			t.Errorf("%v: %d sections, R0 %g, X0 %g; want 1, %g, %g", c.kind, n.Sections(), n.R0, n.X0, c.r0, c.x0)
		}
	}
}

func TestLadderErrors(t *testing.T) {
	if _, err := Ladder(skin(1), 10, 1e6, 1e-3, SeriesRC); !errors.Is(err, ErrLadder) {
		t.Errorf("inductive target as an R-C ladder: %v", err)
	}
	for name, fn := range map[string]func() error{
		"range":     func() error { _, err := Ladder(skin(1), 1e6, 10, 1e-3, SeriesRL); return err },
		"tolerance": func() error { _, err := Ladder(skin(1), 10, 1e6, 0, SeriesRL); return err },
		"kind":      func() error { _, err := Ladder(skin(1), 10, 1e6, 1e-3, 9); return err },
		"NaN": func() error {
			_, err := Ladder(func(float64) complex128 { return cmplx.NaN() }, 10, 1e6, 1e-3, SeriesRL)
			return err
		},
	} {
		if err := fn(); err == nil || errors.Is(err, ErrLadder) {
			t.Errorf("%s: error %v", name, err)
		}
	}
	if got := LadderKind(7).String(); got != "LadderKind(7)" {
		t.Errorf("String of an unknown kind: %q", got)
	}
}

func BenchmarkLadderSkin(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Ladder(skin(1e-3), 100, 1e7, 1e-3, SeriesRL); err != nil {
			b.Fatal(err)
		}
	}
}
