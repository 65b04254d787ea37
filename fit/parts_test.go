package fit

import (
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"realpart/models"
)

// part is a simulated part: a circuit with realistic values, and the sweep
// that a sensible person would take of it. The ranges are common practice, no
// source: what catalogues of such parts span.
type part struct {
	name     string // of the library circuit
	circuit  *models.Circuit
	values   []float64
	freq     []float64
	z        []complex128
	from, to float64
}

// span draws log-uniformly between a and b.
func span(r *rand.Rand, a, b float64) float64 { return a * math.Pow(b/a, r.Float64()) }

// realistic returns values by name and the range of the sweep for a library
// circuit, such that every element is clearly visible in it.
func realistic(r *rand.Rand, name string) (values map[string]float64, from, to float64) {
	resonance := func(l, c float64) float64 { return 1 / (2 * math.Pi * math.Sqrt(l*c)) }
	corner := func(r, c float64) float64 { return 1 / (2 * math.Pi * r * c) }
	v := map[string]float64{}
	switch name {
	case "cap-ideal":
		v["C"] = span(r, 10e-12, 1e-6)
		return v, 1e2, 1e5
	case "cap-esr":
		v["C"] = span(r, 1e-9, 1e-5)
		f := span(r, 1e5, 1e6)
		v["ESR"] = span(r, 0.02, 0.3) / (2 * math.Pi * f * v["C"])
		return v, f / 1e4, f
	case "cap-esr-esl":
		v["C"] = span(r, 1e-9, 1e-4)
		v["ESL"] = span(r, 0.3e-9, 20e-9)
		f := resonance(v["ESL"], v["C"])
		v["ESR"] = math.Sqrt(v["ESL"]/v["C"]) / span(r, 2, 100)
		return v, f / 300, f * 30
	case "cap-leak":
		v["C"] = span(r, 1e-7, 1e-4)
		v["ESL"] = span(r, 1e-9, 20e-9)
		f := resonance(v["ESL"], v["C"])
		v["ESR"] = math.Sqrt(v["ESL"]/v["C"]) / span(r, 1, 20)
		// insulation seen at the low end: D from 0.03 to 0.5 there
		from = f / 3e4
		v["Rp"] = span(r, 2, 30) / (2 * math.Pi * from * v["C"])
		return v, from, f * 10
	case "cap-loss":
		v["C"] = span(r, 1e-9, 1e-5)
		v["ESL"] = span(r, 1e-9, 20e-9)
		v["tand"] = span(r, 0.003, 0.05)
		f := resonance(v["ESL"], v["C"])
		// metallic ESR above the dielectric's share at resonance
		v["ESR"] = v["tand"] * math.Sqrt(v["ESL"]/v["C"]) * span(r, 1, 30)
		return v, f / 1e4, f * 10
	case "cap-two-branch":
		v["C"] = span(r, 10e-6, 2e-3)
		v["ESL"] = span(r, 5e-9, 30e-9)
		v["ESR"] = span(r, 0.02, 0.2)
		v["R1"] = v["ESR"] * span(r, 0.5, 5)
		f := span(r, 3e3, 3e4)
		v["C1"] = 1 / (2 * math.Pi * f * v["R1"])
		return v, 100, 1e7
	case "cap-line":
		v["C"] = span(r, 10e-6, 1e-3)
		v["ESL"] = span(r, 1e-9, 10e-9)
		v["R"] = span(r, 0.05, 0.5)
		v["ESR"] = v["R"] * span(r, 0.05, 0.5)
		f := corner(v["R"], v["C"])
		return v, f / 30, max(1e6, f*1e3)
	case "ind-ideal":
		v["L"] = span(r, 1e-6, 1e-3)
		return v, 1e4, 1e6
	case "ind-dcr":
		v["L"] = span(r, 1e-6, 1e-2)
		f := span(r, 1e5, 1e6)
		v["DCR"] = 2 * math.Pi * f * v["L"] / span(r, 20, 300)
		return v, f / 1e3, f
	case "ind-cp":
		v["L"] = span(r, 1e-6, 1e-3)
		v["Cp"] = span(r, 2e-12, 50e-12)
		f := resonance(v["L"], v["Cp"])
		v["DCR"] = math.Sqrt(v["L"]/v["Cp"]) / span(r, 10, 200)
		return v, f / 1e3, f * 10
	case "ind-core":
		v["L"] = span(r, 1e-6, 1e-2)
		v["Cp"] = span(r, 2e-12, 50e-12)
		f := resonance(v["L"], v["Cp"])
		v["Rp"] = math.Sqrt(v["L"]/v["Cp"]) * span(r, 6, 60)
		from = f / 1e4
		v["DCR"] = 2 * math.Pi * from * v["L"] * span(r, 0.3, 10)
		return v, from, f * 10
	case "ind-skin":
		v["L"] = span(r, 1e-6, 1e-4)
		v["Cp"] = span(r, 2e-12, 50e-12)
		f := resonance(v["L"], v["Cp"])
		from = f / 1e4
		v["DCR"] = 2 * math.Pi * from * v["L"] * span(r, 0.3, 5)
		// equals DCR between 3 and 30 times the low end
		v["K"] = v["DCR"] * math.Sqrt2 / math.Sqrt(2*math.Pi*from*span(r, 3, 100))
		return v, from, f * 10
	case "ind-eddy":
		v["L"] = span(r, 1e-6, 1e-3)
		v["L1"] = v["L"] * span(r, 0.1, 1)
		v["Cp"] = span(r, 2e-12, 50e-12)
		f := resonance(v["L"], v["Cp"])
		fe := f / span(r, 10, 100)
		v["R1"] = 2 * math.Pi * fe * v["L1"]
		from = fe / 1e3
		v["DCR"] = 2 * math.Pi * from * v["L"] * span(r, 1, 10)
		return v, from, f * 10
	case "bead":
		v["R"] = span(r, 50, 2000)
		f := span(r, 3e7, 3e8)
		q := span(r, 0.4, 1.5)
		v["L"] = v["R"] / q / (2 * math.Pi * f)
		v["C"] = q / v["R"] / (2 * math.Pi * f)
		v["DCR"] = span(r, 0.02, 1)
		return v, 1e5, 3e9
	case "bead-two":
		v["R1"] = span(r, 100, 1000)
		f1 := span(r, 1e7, 5e7)
		q1 := span(r, 0.4, 1)
		v["L1"] = v["R1"] / q1 / (2 * math.Pi * f1)
		v["C1"] = q1 / v["R1"] / (2 * math.Pi * f1)
		f2 := f1 * span(r, 6, 20)
		q2 := span(r, 0.5, 1.5)
		v["R2"] = v["R1"] * span(r, 0.3, 1.5)
		v["L2"] = v["R2"] / q2 / (2 * math.Pi * f2)
		v["C2"] = q2 / v["R2"] / (2 * math.Pi * f2)
		v["DCR"] = span(r, 0.02, 1)
		return v, 1e5, 3e9
	case "res-ideal":
		v["R"] = span(r, 1, 1e5)
		return v, 1e2, 1e5
	case "res-series-l":
		v["R"] = span(r, 0.01, 10)
		f := span(r, 1e6, 1e7)
		v["L"] = v["R"] * span(r, 0.1, 1.5) / (2 * math.Pi * f)
		return v, f / 1e4, f
	case "res-shunt-c":
		v["R"] = span(r, 1e3, 1e6)
		f := span(r, 1e5, 1e7)
		v["C"] = span(r, 0.1, 5) / v["R"] / (2 * math.Pi * f)
		return v, f / 1e4, f
	case "res-full":
		v["R"] = span(r, 20, 300)
		f := span(r, 3e8, 2e9)
		q := span(r, 0.4, 1.5) // ω₀L/R
		v["L"] = q * v["R"] / (2 * math.Pi * f)
		v["C"] = 1 / (q * v["R"]) / (2 * math.Pi * f)
		return v, f / 1e4, f * 3
	case "res-bvd":
		f := span(r, 3e6, 3e7)
		v["C0"] = span(r, 2e-12, 8e-12)
		v["C1"] = v["C0"] / span(r, 200, 500)
		v["L1"] = 1 / (4 * math.Pi * math.Pi * f * f * v["C1"])
		v["R1"] = 2 * math.Pi * f * v["L1"] / span(r, 2e3, 5e4)
		width := f * v["C1"] / v["C0"]
		return v, f - 2*width, f + 3*width
	case "series-rlc":
		v["C"] = span(r, 1e-9, 1e-5)
		v["L"] = span(r, 1e-8, 1e-4)
		f := resonance(v["L"], v["C"])
		v["R"] = math.Sqrt(v["L"]/v["C"]) / span(r, 0.7, 100)
		return v, f / 100, f * 100
	case "parallel-rlc":
		v["C"] = span(r, 1e-12, 1e-8)
		v["L"] = span(r, 1e-8, 1e-4)
		f := resonance(v["L"], v["C"])
		v["R"] = math.Sqrt(v["L"]/v["C"]) * span(r, 0.7, 100)
		return v, f / 100, f * 100
	}
	panic("no realistic values for " + name)
}

// simulatePart draws a part and its sweep of n points with the given relative
// noise of real and imaginary part.
func simulatePart(r *rand.Rand, name string, n int, noise float64) part {
	m, ok := models.Lookup(name)
	if !ok {
		panic("no circuit " + name)
	}
	named, from, to := realistic(r, name)
	values := make([]float64, len(named))
	for i, p := range m.Circuit.Parameters() {
		v, ok := named[p.Name]
		if !ok {
			panic("no value for " + p.Name + " of " + name)
		}
		values[i] = v
	}
	freq := make([]float64, n)
	for i := range freq {
		if name == "res-bvd" { // a crystal's resonance is seen on a linear sweep
			freq[i] = from + (to-from)*float64(i)/float64(n-1)
		} else {
			freq[i] = from * math.Pow(to/from, float64(i)/float64(n-1))
		}
	}
	z := make([]complex128, n)
	m.Circuit.NewEvaluator(freq).Impedance(z, values)
	addNoise(r, z, noise)
	return part{name: name, circuit: m.Circuit, values: values, freq: freq, z: z, from: from, to: to}
}

func addNoise(r *rand.Rand, z []complex128, noise float64) {
	for i := range z {
		z[i] *= complex(1+noise*r.NormFloat64(), noise*r.NormFloat64())
	}
}

// Every library circuit is recovered without any help: each parameter of
// seeded random parts within five standard errors.
func TestRecovery(t *testing.T) {
	parts := 10
	if n, err := strconv.Atoi(os.Getenv("PARTS")); err == nil {
		parts = n
	}
	for _, m := range models.Library() {
		t.Run(m.Name, func(t *testing.T) {
			t.Parallel()
			for seed := range parts {
				r := rand.New(rand.NewPCG(uint64(seed), 1))
				p := simulatePart(r, m.Name, 201, 0.001)
				result, err := Fit(p.freq, p.z, p.circuit, nil)
				if err != nil {
					t.Errorf("part %d: %v", seed, err)
					continue
				}
				order(p.circuit, p.values, &Settings{})
				if !result.Status.Converged() {
					t.Errorf("part %d: %v: %s", seed, result.Status, result.Reason)
				}
				if !(result.RMSRelative < 1.2*0.001*math.Sqrt2) {
					t.Errorf("part %d: rms %.3g, want the noise %.3g", seed, result.RMSRelative, 0.001*math.Sqrt2)
				}
				for i, q := range result.Parameters {
					if deviation := math.Abs(q.Value-p.values[i]) / q.StdError; !(deviation < 5) {
						t.Errorf("part %d: %s = %.5g ± %.2g, truth %.5g: %.1f standard errors", seed, q.Name, q.Value, q.StdError, p.values[i], deviation)
					}
				}
			}
		})
	}
}
