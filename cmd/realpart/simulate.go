package main

import (
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"strings"

	"github.com/spf13/cobra"

	"realpart/ingest"
	"realpart/models"
	"realpart/models/quantity"
)

func newSimulate(s streams) *cobra.Command {
	f := struct {
		circuit, spacing, out, touchstone string
		set                               assignments
		from, to                          hertz
		points                            int
		noise                             share
		seed                              uint64
	}{set: assignments{flag: "--set"}, from: 100, to: 10e6}
	cmd := &cobra.Command{
		Use:   "simulate --circuit EXPR --set NAME=VALUE…",
		Short: "Write the sweep that a circuit would give, with optional noise",
		Example: `  realpart simulate --circuit 'ESR + ESL + C' --set ESR=20mOhm --set ESL=5nH \
    --set C=10uF --noise 0.1% --seed 7 --out part.csv`,
		Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			circuit, name, err := findCircuit(f.circuit)
			if err != nil {
				return err
			}
			if circuit == nil {
				return usagef("--circuit: expected an expression or a library name, found none")
			}
			values, err := f.set.complete(circuit)
			if err != nil {
				return err
			}
			freq, err := grid(float64(f.from), float64(f.to), f.points, f.spacing)
			if err != nil {
				return err
			}
			z := make([]complex128, len(freq))
			circuit.NewEvaluator(freq).Impedance(z, values)
			for i, v := range z {
				if v == 0 || math.IsInf(real(v), 0) || math.IsInf(imag(v), 0) || math.IsNaN(real(v)+imag(v)) {
					return usagef("--set: expected values with a finite impedance, found Z = %v at %v Hz", v, freq[i])
				}
			}
			addNoise(z, float64(f.noise), f.seed)
			comment := describeSimulation(circuit, name, values, float64(f.noise), f.seed)
			if f.touchstone != "" {
				if err := distinct(map[string]string{"--out": f.out, "--touchstone": f.touchstone}, nil); f.out != "" && err != nil {
					return err
				}
				if err := writeFile(f.touchstone, func(w io.Writer) error {
					return writeTouchstone(w, freq, z, comment)
				}); err != nil {
					return err
				}
				if f.out == "" {
					return nil
				}
			}
			write := func(w io.Writer) error { return writeSweep(w, freq, z, comment) }
			if f.out == "" || f.out == "-" {
				return write(s.out)
			}
			return writeFile(f.out, write)
		},
	}
	flags := cmd.Flags()
	flags.StringVar(&f.circuit, "circuit", "", "library name or expression, such as 'ESR + ESL + C'")
	flags.Var(&f.set, "set", "`NAME=VALUE` of a parameter; repeat for all of them")
	flags.Var(&f.from, "from", "lowest `FREQUENCY`")
	flags.Var(&f.to, "to", "highest `FREQUENCY`")
	flags.IntVar(&f.points, "points", 201, "number of points")
	flags.StringVar(&f.spacing, "spacing", "log", "`log` or linear")
	flags.Var(&f.noise, "noise", "standard `DEVIATION` of the relative error of each of the real and imaginary part, such as 0.1%")
	flags.Uint64Var(&f.seed, "seed", 1, "seed of the noise")
	flags.StringVar(&f.out, "out", "", "write to `FILE` instead of standard output")
	flags.StringVar(&f.touchstone, "touchstone", "", "also write a one-port .s1p `FILE`")
	return cmd
}

// grid returns the frequencies of a simulated sweep.
func grid(from, to float64, points int, spacing string) ([]float64, error) {
	if !(from > 0 && from < to) {
		return nil, usagef("--from, --to: expected rising positive frequencies, found %s to %s", quantity.Format(from, "Hz", 4), quantity.Format(to, "Hz", 4))
	}
	if points < 2 || points > 1_000_000 {
		return nil, usagef("--points: expected 2 to 1000000, found %d", points)
	}
	freq := make([]float64, points)
	for i := range freq {
		t := float64(i) / float64(points-1)
		switch spacing {
		case "log":
			freq[i] = from * math.Pow(to/from, t)
		case "linear":
			freq[i] = from + t*(to-from)
		default:
			return nil, usagef("--spacing: expected log or linear, found %q", spacing)
		}
	}
	freq[points-1] = to
	return freq, nil
}

// addNoise multiplies each impedance by 1 + a + jb with independent normal a
// and b of the given standard deviation.
func addNoise(z []complex128, deviation float64, seed uint64) {
	r := rand.New(rand.NewPCG(seed, 0))
	for i := range z {
		z[i] *= complex(1+deviation*r.NormFloat64(), deviation*r.NormFloat64())
	}
}

func describeSimulation(c *models.Circuit, name string, values []float64, noise float64, seed uint64) []string {
	var set []string
	for i, p := range c.Parameters() {
		set = append(set, fmt.Sprintf("%s=%v", p.Name, values[i]))
	}
	what := c.String()
	if name != "" {
		what = name + ": " + what
	}
	lines := []string{"simulated, not measured", what, strings.Join(set, " ")}
	if noise > 0 {
		lines = append(lines, fmt.Sprintf("noise %v %% of each part, seed %d", noise*100, seed))
	}
	return lines
}

// simulatedPoint is a row of a simulated sweep.
type simulatedPoint struct {
	Frequency float64 `csv:"frequency_hz"`
	Magnitude float64 `csv:"impedance_ohm"`
	Phase     float64 `csv:"phase_deg"`
}

// writeSweep writes a sweep as CSV under comment lines. Numbers have the
// digits that give the same float64 back.
func writeSweep(w io.Writer, freq []float64, z []complex128, comment []string) error {
	for _, line := range comment {
		if _, err := fmt.Fprintf(w, "# %s\n", line); err != nil {
			return err
		}
	}
	rows := make([]simulatedPoint, len(freq))
	for i := range freq {
		rows[i] = simulatedPoint{freq[i], math.Hypot(real(z[i]), imag(z[i])), 180 / math.Pi * math.Atan2(imag(z[i]), real(z[i]))}
	}
	return ingest.WriteTable(w, rows)
}

func writeTouchstone(w io.Writer, freq []float64, z []complex128, comment []string) error {
	return ingest.WriteTouchstone(w, freq, z, comment)
}
