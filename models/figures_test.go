package models

import (
	"fmt"
	"math"
	"testing"
)

// A capacitor of C_s = 1 µF and D = 0.02 at 1 kHz, by the standard conversions
// (computed in double precision, ten digits): ESR = D/(ωC_s), C_p = C_s/(1+D²),
// R_p = (1+D²)/(DωC_s), Q = 1/D.
func TestFiguresOfACapacitor(t *testing.T) {
	const f = 1e3
	x := -1 / (2 * math.Pi * f * 1e-6)
	z := complex(0.02*-x, x)
	for figure, want := range map[Figure]float64{
		ESR: 3.183098862, X: -159.1549431, Cs: 1e-6, D: 0.02, Q: 50, Cp: 0.9996001599e-6,
	} {
		got, _, _ := figure.Of(f, z)
		requireRelative(t, string(figure), got, want, 1e-9)
	}
	requireRelative(t, "R_p = 1/Re Y", 1/real(1/z), 7960.930253, 1e-9)

	// The same from the parallel circuit of those values.
	z = mustParse("Rp || Cp").At(f, []float64{7960.930253, 0.9996001599e-6})
	for figure, want := range map[Figure]float64{ESR: 3.183098862, Cs: 1e-6, D: 0.02, Cp: 0.9996001599e-6} {
		got, _, _ := figure.Of(f, z)
		requireRelative(t, string(figure)+" of Rp || Cp", got, want, 1e-9)
	}
}

// The duals for an inductor: L_p = L_s·(1 + D²), and both equal without loss.
func TestFiguresOfAnInductor(t *testing.T) {
	const f, ls, d = 1e5, 47e-6, 0.1
	x := 2 * math.Pi * f * ls
	z := complex(d*x, x)
	for figure, want := range map[Figure]float64{
		ESR: d * x, X: x, Ls: ls, Lp: ls * (1 + d*d), D: d, Q: 1 / d,
		Zabs: x * math.Sqrt(1+d*d), Phase: 90 - math.Atan(d)*180/math.Pi,
		Cs: -1 / (2 * math.Pi * f * x),
	} {
		got, _, _ := figure.Of(f, z)
		requireRelative(t, string(figure), got, want, 1e-14)
	}
	lp, _, _ := Lp.Of(f, complex(0, x))
	requireRelative(t, "L_p without loss", lp, ls, 1e-15)
	lp, _, _ = Lp.Of(f, mustParse("R || L").At(f, []float64{7, ls}))
	requireRelative(t, "L_p of R || L", lp, ls, 1e-14)
}

// D and Q have no sign; C_s is negative above a capacitor's resonance, L_s
// below zero for a capacitor.
func TestSignsOfFigures(t *testing.T) {
	for _, x := range []float64{3, -3} {
		for figure, want := range map[Figure]float64{D: 0.5 / 3, Q: 6} {
			got, _, _ := figure.Of(1, complex(0.5, x))
			requireRelative(t, string(figure), got, want, 1e-15)
		}
		for _, figure := range []Figure{Ls, Lp, Phase} {
			if got, _, _ := figure.Of(1, complex(0.5, x)); got*x <= 0 {
				t.Errorf("%s = %v at a reactance of %v", figure, got, x)
			}
		}
		for _, figure := range []Figure{Cs, Cp} {
			if got, _, _ := figure.Of(1, complex(0.5, x)); got*x >= 0 {
				t.Errorf("%s = %v at a reactance of %v", figure, got, x)
			}
		}
	}
}

// Five-point differences with steps of 1e-3 of |Z| are good to about 1e-11 of
// the figure's own size over |Z|. The tolerance is relative to the gradient.
func TestFigureDerivatives(t *testing.T) {
	for _, f := range []float64{1e3, 7e7} {
		for _, z := range []complex128{3 + 4i, 3 - 4i, 0.02 - 0.5i, 0.5 + 0.04i, 1e6 - 2e5i, 1e-3 + 1e-3i} {
			for _, figure := range Figures() {
				value, byR, byX := figure.Of(f, z)
				h := 1e-3 * min(math.Abs(real(z)), math.Abs(imag(z)))
				difference := func(direction complex128) float64 {
					return real(differentiate(func(s float64) complex128 {
						v, _, _ := figure.Of(f, z+complex(s, 0)*direction)
						return complex(v, 0)
					}, h))
				}
				gradient := math.Hypot(byR, byX)
				requireClose(t, fmt.Sprintf("%s of %v by R", figure, z), complex(byR, 0), complex(difference(1), 0), 1e-8, gradient)
				requireClose(t, fmt.Sprintf("%s of %v by X", figure, z), complex(byX, 0), complex(difference(1i), 0), 1e-8, gradient)
				if math.IsNaN(value) {
					t.Errorf("%s of %v is NaN", figure, z)
				}
			}
		}
	}
}

func TestFigureNames(t *testing.T) {
	want := []struct{ name, unit string }{
		{"ESR", "Ω"}, {"X", "Ω"}, {"Cs", "F"}, {"Cp", "F"}, {"Ls", "H"}, {"Lp", "H"}, {"D", "1"}, {"Q", "1"}, {"Z", "Ω"}, {"phase", "°"},
	}
	got := Figures()
	if len(got) != len(want) {
		t.Fatalf("%d figures, want %d", len(got), len(want))
	}
	for i, w := range want {
		if string(got[i]) != w.name || got[i].Unit() != w.unit || !got[i].Known() {
			t.Errorf("figure %d: %s in %s, known %v; want %s in %s", i, got[i], got[i].Unit(), got[i].Known(), w.name, w.unit)
		}
	}
	if Figure("esr").Known() {
		t.Error(`"esr" is known; names are case-sensitive`)
	}
	defer func() {
		if recover() == nil {
			t.Error("no panic for an unknown figure")
		}
	}()
	Figure("esr").Of(1, 1)
}
