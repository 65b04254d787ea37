package netlist

import (
	"bytes"
	"flag"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"realpart/report"
)

var update = flag.Bool("update", false, "write the golden files anew")

// One file with several parts: names are safe and unique, all is ASCII, and
// numbers carry exponents, never suffix letters.
func TestWrite(t *testing.T) {
	heron := record(t, "c017", "cap-leak", "ESR + ESL + (C || Rp)", []float64{0.0213, 2.3e-10, 9.87e-6, 47e6}, 100, 1e7)
	heron.Sweep.Lot = "lot-heron"
	heron.Sweep.File = "lot-heron/c017.csv\n.END"
	heron.Parameters[1].Determined, heron.Parameters[1].Low95 = false, nil
	heron.Parameters[3].Fixed = true
	otter := record(t, "C017", "", "C1 + Rx + Rp + RP", []float64{1e-8, 1, 2, 3}, 100, 1e5)
	otter.Status = report.NotConverged
	odd := record(t, "7 µH <x>\r\n.end", "", "L || R", []float64{7e-6, 1e3}, 100, 1e5)
	failed := report.Failed(report.Sweep{File: "x.csv", Part: "x"}, report.Error{Line: 3, Text: "expected a number\n.END"})
	fits := []*report.Fit{heron, otter, odd, failed, odd}
	var b, parallel bytes.Buffer
	if err := Write(&b, fits, Options{Made: "realpart test"}); err != nil {
		t.Fatal(err)
	}
	if err := Write(&parallel, fits, Options{Made: "realpart test", Jobs: 4}); err != nil || parallel.String() != b.String() {
		t.Errorf("with four workers the netlist differs, error %v", err)
	}
	path := filepath.Join("..", "..", "testdata", "report", "netlist.lib")
	if *update {
		if err := os.WriteFile(path, b.Bytes(), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(string(want), b.String()); diff != "" {
		t.Errorf("%s differs (-want +got); -update writes it anew:\n%s", path, diff)
	}
	line := regexp.MustCompile(`^(\*[ -~]*|\.SUBCKT [A-Za-z]\w* a b|\.ENDS [A-Za-z]\w*|[RLC]\w* (a|n\d+) (b|n\d+) \d(\.\d+)?e[+-]\d+)$`)
	subcircuits := map[string]bool{}
	for _, l := range strings.Split(strings.TrimSuffix(b.String(), "\n"), "\n") {
		if !line.MatchString(l) {
			t.Errorf("line %q is not one that every simulator reads", l)
		}
		if name, ok := strings.CutPrefix(l, ".SUBCKT "); ok {
			name = strings.ToLower(name)
			if subcircuits[name] {
				t.Errorf("two subcircuits %s", name)
			}
			subcircuits[name] = true
		}
	}
	if len(subcircuits) != 4 {
		t.Errorf("%d subcircuits, want 4", len(subcircuits))
	}
}

func TestWriteErrors(t *testing.T) {
	check := func(f *report.Fit, o Options, want string) {
		t.Helper()
		var b bytes.Buffer
		err := Write(&b, []*report.Fit{f}, o)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("error %v, want one with %q", err, want)
		}
		if b.Len() > 0 {
			t.Error("an incomplete netlist was written")
		}
	}
	good := func() *report.Fit { return record(t, "c", "", "R + C", []float64{1, 1e-6}, 100, 1e5) }
	f := good()
	f.Parameters[1].Value = math.NaN()
	check(f, Options{}, "C = NaN")
	f = good()
	f.Parameters[0].Value = -1
	check(f, Options{}, "R = -1")
	f = good()
	f.Circuit.Expression = "R +"
	check(f, Options{}, "column")
	f = good()
	f.Parameters = f.Parameters[:1]
	check(f, Options{}, "1 values for the 2 parameters")
	f = good()
	f.Sweep.FMin = 0
	check(f, Options{}, "positive, rising range")
	check(good(), Options{LadderError: 2}, "ladder error 2")
	check(good(), Options{LadderRealError: -1}, "ladder error -1")
}

func BenchmarkWrite(b *testing.B) {
	f := record(b, "c", "cap-loss", "ESR + ESL + loss(C, tand)", parts["cap-loss"].values, 100, 1e7)
	b.ReportAllocs()
	for b.Loop() {
		var out bytes.Buffer
		if err := Write(&out, []*report.Fit{f}, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
