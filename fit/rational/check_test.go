package rational

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"
)

var sweep201 = logSpaced(100, 1e7, 201)

// clean returns a noisy sweep of a random part of kind i at 0.1 %, and the source it came from.
func clean(i, seed int) ([]complex128, *rand.Rand) {
	src := seeded(10000*i + seed)
	return noisy(sample(parts[i].make(src), sweep201), 1e-3, src), src
}

func check201(t *testing.T, z []complex128) *Consistency {
	t.Helper()
	c, err := Check(sweep201, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	if c.Consistent != (len(c.Reasons) == 0) {
		t.Errorf("consistent %v with the reasons %q", c.Consistent, c.Reasons)
	}
	return c
}

func TestCleanSweepsPass(t *testing.T) {
	total, alarms := 0, 0
	for i, p := range parts {
		for k := range 3 * *seeds {
			z, _ := clean(i, k)
			c := check201(t, z)
			total++
			if !c.Consistent {
				alarms++
				t.Logf("%s, seed %d: %q", p.name, k, c.Reasons)
			}
		}
	}
	t.Logf("false alarms: %d of %d clean sweeps", alarms, total)
	if alarms > total/100 {
		t.Errorf("false alarms: %d of %d clean sweeps", alarms, total)
	}
}

// Other numbers of points, spacings and noise.
func TestCleanShapesPass(t *testing.T) {
	for _, c := range []struct {
		name  string
		f     []float64
		sigma float64
	}{
		{"30 points, logarithmic, 0.1 %", logSpaced(100, 1e5, 30), 1e-3},
		{"51 points, logarithmic, 0.01 %", logSpaced(100, 1e7, 51), 1e-4},
		{"401 points, logarithmic, 1 %", logSpaced(20, 2e6, 401), 1e-2},
		{"801 points, linear, 1 %", linSpaced(1e3, 1e6, 801), 1e-2},
	} {
		total, alarms := 0, 0
		for i, p := range parts {
			for k := range (*seeds + 1) / 2 {
				src := seeded(70000 + 1000*i + k)
				got, err := Check(c.f, noisy(sample(p.make(src), c.f), c.sigma, src), nil)
				if err != nil {
					t.Fatal(err)
				}
				total++
				if !got.Consistent {
					alarms++
					t.Logf("%s: %s, seed %d: %q", c.name, p.name, k, got.Reasons)
				}
			}
		}
		t.Logf("%s: false alarms %d of %d", c.name, alarms, total)
		if alarms > 1+total/100 {
			t.Errorf("%s: false alarms %d of %d", c.name, alarms, total)
		}
	}
}

// sizes returns the fault sizes: all of them when more seeds are asked for than the quick test has.
func sizes(quick, all []float64) []float64 {
	if *seeds > 2 {
		return all
	}
	return quick
}

func TestStepsAreFound(t *testing.T) {
	t.Logf("level step at 0.1 %% noise, 201 points:")
	for _, size := range sizes([]float64{0.002, 0.005}, []float64{0.001, 0.002, 0.005, 0.01}) {
		total, found, extra := 0, 0, 0
		for i, p := range parts {
			for k := range *seeds {
				z, src := clean(i, k)
				at := 20 + src.IntN(160)
				steps, err := Steps(sweep201, levelled(z, at, -math.Log1p(size)), nil)
				if err != nil {
					t.Fatal(err)
				}
				total++
				hit := false
				for _, s := range steps {
					// In noise, a neighbouring gap may fit as well; the resonance of a part makes it two.
					if j := s.Index - at; j >= -2 && j <= 2 {
						hit = true
						if !(math.Abs(s.Relative-size) < 5*s.Sigma) {
							t.Errorf("%s, seed %d: step of %g estimated as %g ± %g", p.name, k, size, s.Relative, s.Sigma)
						}
						if !(s.Freq > sweep201[s.Index-1] && s.Freq < sweep201[s.Index]) {
							t.Errorf("step %+v is not between its points", s)
						}
					} else {
						extra++
					}
				}
				if hit {
					found++
				} else if size >= 0.005 {
					t.Logf("%s, seed %d: step of %g at %d not found: %+v", p.name, k, size, at, steps)
				}
			}
		}
		t.Logf("  %.1f %%: found %d of %d, elsewhere %d", 100*size, found, total, extra)
		if size >= 0.005 && (float64(found) < 0.95*float64(total) || extra > total/50+1) {
			t.Errorf("step of %g: found %d of %d, elsewhere %d", size, found, total, extra)
		}
	}
}

func TestTwoSteps(t *testing.T) {
	z, _ := clean(0, 1)
	z = levelled(levelled(z, 60, -math.Log1p(0.01)), 140, -math.Log1p(-0.02))
	steps, err := Steps(sweep201, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	if len(steps) != 2 || steps[0].Index != 60 || steps[1].Index != 140 {
		t.Errorf("got %+v, want steps at 60 and 140", steps)
	}
}

func TestOutlierIsNoStep(t *testing.T) {
	for i, p := range parts {
		z, _ := clean(i, 2)
		z[100] *= 1.02
		steps, err := Steps(sweep201, z, nil)
		if err != nil {
			t.Fatal(err)
		}
		if len(steps) > 0 {
			t.Errorf("%s: an outlier is taken for the steps %+v", p.name, steps)
		}
	}
}

func TestDriftIsFound(t *testing.T) {
	t.Logf("drift of one element over the last third at 0.1 %% noise, 201 points:")
	for _, size := range sizes([]float64{0.03}, []float64{0.01, 0.02, 0.03, 0.05}) {
		total, found, smooth := 0, 0, 0
		for i, p := range drifting {
			for k := range max(1, *seeds/2) {
				src := seeded(20000 + 100*i + k)
				c := check201(t, noisy(drifted(p.make, src.Uint64(), sweep201, size), 1e-3, src))
				total++
				if !c.Consistent {
					found++
				}
				if c.StructureP < structureLevel {
					smooth++
				}
			}
		}
		t.Logf("  %.0f %%: inconsistent %d of %d, of these with a smooth residual %d", 100*size, found, total, smooth)
		if size >= 0.03 && float64(found) < 0.8*float64(total) {
			t.Errorf("drift of %g: inconsistent %d of %d", size, found, total)
		}
	}
}

func TestWrongColumns(t *testing.T) {
	for i, p := range parts {
		z, _ := clean(i, 3)
		reversed, swapped := make([]complex128, len(z)), make([]complex128, len(z))
		visible := false
		for k, v := range z {
			reversed[k] = cmplx.Conj(v)
			swapped[k] = complex(imag(v), real(v))
			visible = visible || math.Abs(cmplx.Phase(v)) > 0.1
		}
		if c := check201(t, reversed); c.Consistent == visible {
			t.Errorf("%s, phase reversed: consistent %v, phase sense %.2f", p.name, c.Consistent, c.PhaseSense)
		}
		if c := check201(t, swapped); c.Consistent {
			t.Errorf("%s, columns swapped: consistent", p.name)
		}
		// Without noise, too.
		for k, v := range sample(p.make(seeded(10000*i+3)), sweep201) {
			reversed[k] = cmplx.Conj(v)
		}
		if c := check201(t, reversed); c.Consistent {
			t.Errorf("%s, exact, phase reversed: consistent, phase sense %.2f", p.name, c.PhaseSense)
		}
	}
}

func TestActivePoints(t *testing.T) {
	z, _ := clean(0, 4)
	z[50] = complex(-real(z[50])-0.2*cmplx.Abs(z[50]), imag(z[50]))
	c := check201(t, z)
	if !slices.Contains(c.Active, 50) || c.Consistent {
		t.Errorf("active points %v, consistent %v", c.Active, c.Consistent)
	}
}

func TestToleranceLetsPass(t *testing.T) {
	f := sweep201
	src := seeded(1)
	z := sample(relaxation(10, 90, 2e-5), f)
	for i, v := range z {
		z[i] = complex(real(v), 1.05*imag(v))
	}
	c, err := Check(f, noisy(z, 1e-3, src), &CheckSettings{Tolerance: 0.05})
	if err != nil {
		t.Fatal(err)
	}
	if !c.Consistent || !(c.StructureP < 1e-6) {
		t.Errorf("%q, structure p %g; want a significant misfit within the tolerance", c.Reasons, c.StructureP)
	}
	if _, err := Check(f, z, &CheckSettings{Tolerance: -1}); err == nil {
		t.Error("no error for a negative tolerance")
	}
}
