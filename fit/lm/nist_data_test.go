package lm

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
)

const nistFolder = "../../testdata/nist-strd"

// nistProblem is one file of the NIST Statistical Reference Datasets, nonlinear regression (see the README beside the
// files).
type nistProblem struct {
	name      string
	model     nistModel
	starts    [2][]float64
	certified []float64
	deviation []float64 // certified standard deviations of the parameters
	rss       float64   // certified residual sum of squares
	residual  float64   // certified residual standard deviation
	y         []float64
	x         [][]float64
}

func (p *nistProblem) problem(analytic bool) Problem {
	problem := Problem{
		Size: len(p.y),
		Residual: func(dst, b []float64) {
			for i, y := range p.y {
				dst[i] = p.model.value(b, p.x[i]) - y
			}
		},
	}
	if analytic {
		problem.Jacobian = func(dst *mat.Dense, b []float64) {
			for i := range p.y {
				p.model.gradient(dst.RawRowView(i), b, p.x[i])
			}
		}
	}
	return problem
}

var (
	nistLines     = regexp.MustCompile(`(Starting Values|Certified Values|Data)\s+\(lines\s+(\d+)\s+to\s+(\d+)\)`)
	nistParameter = regexp.MustCompile(`^\s*b\d+\s*=`)
)

// readNIST reads a file by the line ranges in its own header and fails on anything it does not expect.
func readNIST(t testing.TB, file string) *nistProblem {
	t.Helper()
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.ReplaceAll(string(raw), "\r\n", "\n"), "\n")
	p := &nistProblem{name: strings.TrimSuffix(filepath.Base(file), ".dat")}
	model, ok := nistModels[p.name]
	if !ok {
		t.Fatalf("%s: no model of this name", file)
	}
	p.model = model

	number := func(line int, text string) float64 {
		t.Helper()
		v, err := strconv.ParseFloat(text, 64)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			t.Fatalf("%s:%d: expected a number, found %q", file, line, text)
		}
		return v
	}
	ranges := map[string][2]int{}
	for _, l := range lines[:10] {
		if hit := nistLines.FindStringSubmatch(l); hit != nil {
			ranges[hit[1]] = [2]int{int(number(0, hit[2])), int(number(0, hit[3]))}
		}
	}
	if len(ranges) != 3 {
		t.Fatalf("%s: header names the line ranges %v, expected three", file, ranges)
	}
	for i := ranges["Starting Values"][0]; i <= ranges["Starting Values"][1]; i++ {
		l := lines[i-1]
		if !nistParameter.MatchString(l) {
			t.Fatalf("%s:%d: expected a parameter, found %q", file, i, l)
		}
		f := strings.Fields(l[strings.Index(l, "=")+1:])
		if len(f) != 4 {
			t.Fatalf("%s:%d: expected 4 numbers, found %q", file, i, l)
		}
		p.starts[0] = append(p.starts[0], number(i, f[0]))
		p.starts[1] = append(p.starts[1], number(i, f[1]))
		p.certified = append(p.certified, number(i, f[2]))
		p.deviation = append(p.deviation, number(i, f[3]))
	}
	observations := -1
	for i := ranges["Starting Values"][1] + 1; i < ranges["Data"][0]; i++ {
		key, value, _ := strings.Cut(lines[i-1], ":")
		switch value = strings.TrimSpace(value); strings.TrimSpace(key) {
		case "Residual Sum of Squares":
			p.rss = number(i, value)
		case "Residual Standard Deviation":
			p.residual = number(i, value)
		case "Number of Observations":
			observations = int(number(i, value))
		}
	}
	for i := ranges["Data"][0]; i <= ranges["Data"][1]; i++ {
		f := strings.Fields(lines[i-1])
		if len(f) < 2 {
			t.Fatalf("%s:%d: expected y and x, found %q", file, i, lines[i-1])
		}
		y := number(i, f[0])
		if p.model.logY {
			y = math.Log(y)
		}
		var x []float64
		for _, v := range f[1:] {
			x = append(x, number(i, v))
		}
		p.y, p.x = append(p.y, y), append(p.x, x)
	}
	if len(p.y) != observations || !(p.rss > 0) || !(p.residual > 0) {
		t.Fatalf("%s: %d rows of %d, sum of squares %v, standard deviation %v", file, len(p.y), observations, p.rss, p.residual)
	}
	return p
}

// nistProblems reads all 27 files.
func nistProblems(t testing.TB) []*nistProblem {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(nistFolder, "*.dat"))
	if err != nil || len(files) != 27 || len(nistModels) != 27 {
		t.Fatalf("%d files and %d models in %s (%v), expected 27", len(files), len(nistModels), nistFolder, err)
	}
	problems := make([]*nistProblem, len(files))
	for i, f := range files {
		problems[i] = readNIST(t, f)
	}
	return problems
}

// digits is NIST's score LRE = −log₁₀(|got − want|/|want|), at most the 11 digits that are certified. A wrong sign
// costs all digits and NaN gives −Inf, so that no comparison with a minimum passes.
func digits(got, want float64) float64 {
	if math.IsNaN(got) || want == 0 {
		return math.Inf(-1)
	}
	return math.Min(11, -math.Log10(math.Abs(got-want)/math.Abs(want)))
}

func minDigits(got, want []float64) float64 {
	if len(got) != len(want) {
		panic(fmt.Sprintf("%d values for %d", len(got), len(want)))
	}
	least := math.Inf(1)
	for i, v := range got {
		least = math.Min(least, digits(v, want[i]))
	}
	return least
}
