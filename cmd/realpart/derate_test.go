package main

import (
	"bytes"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// derateJSON runs a command line with --json and returns the exit code, the
// object and what was said on standard error.
func derateJSON(t *testing.T, args ...string) (code int, object map[string]any, stderr string) {
	t.Helper()
	var out, err bytes.Buffer
	code = run(append(args, "--json"), streams{in: strings.NewReader(""), out: &out, err: &err})
	if out.Len() > 0 {
		if fault := json.Unmarshal(out.Bytes(), &object); fault != nil {
			t.Fatalf("%v: %v in %s", args, fault, out.String())
		}
	}
	return code, object, err.String()
}

// at follows a path such as harmonics.0.esr_ohm.
func at(object any, path string) any {
	for _, name := range strings.Split(path, ".") {
		switch v := object.(type) {
		case map[string]any:
			object = v[name]
		case []any:
			i, err := strconv.Atoi(name)
			if err != nil || i >= len(v) {
				return nil
			}
			object = v[i]
		default:
			return nil
		}
	}
	return object
}

// The cases of testdata/derating are computed by hand; the arithmetic stands in
// each file.
func TestDerateByHand(t *testing.T) {
	t.Chdir("../../testdata/derating")
	files, err := filepath.Glob("*.case")
	if err != nil || len(files) < 7 {
		t.Fatalf("expected the cases of testdata/derating, found %d (%v)", len(files), err)
	}
	for _, file := range files {
		t.Run(strings.TrimSuffix(file, ".case"), func(t *testing.T) {
			text, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			code, checks := -1, 0
			var object map[string]any
			for n, line := range strings.Split(string(text), "\n") {
				line = strings.TrimSpace(line)
				if line == "" || strings.HasPrefix(line, "#") {
					continue
				}
				if strings.HasPrefix(line, "derate ") {
					var stderr string
					code, object, stderr = derateJSON(t, caseArguments(line)...)
					if stderr != "" {
						t.Fatalf("%s: %s", line, stderr)
					}
					continue
				}
				name, want, ok := strings.Cut(line, " = ")
				if !ok || code < 0 {
					t.Fatalf("%s:%d: expected a command, then name = value, found %q", file, n+1, line)
				}
				checks++
				want, tolerance := strings.TrimSpace(want), 2e-5
				if value, own, ok := strings.Cut(want, " ~ "); ok {
					if tolerance, err = strconv.ParseFloat(own, 64); err != nil {
						t.Fatalf("%s:%d: %v", file, n+1, err)
					}
					want = value
				}
				var got any = float64(code)
				if name != "exit" {
					got = at(object, name)
				}
				number, err := strconv.ParseFloat(want, 64)
				if err != nil {
					if got != want {
						t.Errorf("%s:%d: %s is %v, want %q", file, n+1, name, got, want)
					}
					continue
				}
				v, ok := got.(float64)
				if !ok || !(math.Abs(v-number) <= tolerance*math.Abs(number)) {
					t.Errorf("%s:%d: %s is %v, want %v within %v of it", file, n+1, name, got, number, tolerance)
				}
			}
			if checks == 0 {
				t.Errorf("%s checks nothing", file)
			}
		})
	}
}

// caseArguments splits a command line at spaces, with single quotes.
func caseArguments(line string) []string {
	var args []string
	for i, part := range strings.Split(line, "'") {
		if i%2 == 1 {
			args = append(args, part)
		} else {
			args = append(args, strings.Fields(part)...)
		}
	}
	return args
}

// The exit code is 0, 1 when exceeded, 2 for wrong use, and 3, which outranks 1,
// when a sweep could not be read.
func TestDerateExitCodes(t *testing.T) {
	t.Chdir("../../testdata/derating")
	for _, c := range []struct {
		line string
		want int
	}{
		{"derate fifty.csv --circuit cap-esr-esl --ripple 100kHz=2A", 0},
		{"derate fifty.csv --circuit cap-esr-esl --ripple 100kHz=2A --rth 20 --ambient 60 --limit 61", 1},
		{"derate fifty.csv --ripple 100kHz=2A --limit 61", 2},
		{"derate fifty.csv --ripple 100kHz", 2},
		{"derate fifty.csv choke.csv --ripple 100kHz=2A", 2}, // two kinds
		{"derate none.csv --ripple 100kHz=2A", 3},
		{"derate fifty.csv none.csv --circuit cap-esr-esl --ripple 100kHz=2A --rth 20 --ambient 60 --limit 61", 3},
	} {
		code, object, stderr := derateJSON(t, caseArguments(c.line)...)
		if code != c.want {
			t.Errorf("%s: exit %d, want %d (%s)", c.line, code, c.want, stderr)
		}
		if (code == 0 || code == 1) != (stderr == "") {
			t.Errorf("%s: exit %d with %q on standard error", c.line, code, stderr)
		}
		if done := code < 2 || strings.Contains(c.line, "fifty.csv none.csv"); done != (object != nil) {
			t.Errorf("%s: exit %d, object %v", c.line, code, object)
		}
	}
}

// Records of fits give what the sweeps gave, of a lot and of a part; only what
// the points themselves say is absent.
func TestDerateRecords(t *testing.T) {
	const tolerance = 1e-9
	folder := filepath.Join("..", "..", "testdata", "demo", "heron")
	first, err := filepath.Glob(filepath.Join(folder, "*01.csv"))
	if err != nil || len(first) != 1 {
		t.Fatalf("the first sweep of %s: %v, %v", folder, first, err)
	}
	conditions := []string{"--ripple", "trapezoid:6A,duty=0.4,rise=60ns@100kHz", "--rth", "48", "--ambient", "55", "--limit", "105", "--margin", "15",
		"--dc", "24", "--rated-voltage", "35", "--voltage-factor", "0.8"}
	for _, sweeps := range []string{folder, first[0]} {
		var records, stderr bytes.Buffer
		if code := run([]string{"fit", "--json", "--circuit", "cap-two-branch", sweeps}, streams{in: strings.NewReader(""), out: &records, err: &stderr}); code != 0 {
			t.Fatalf("fit: exit %d: %s", code, stderr.String())
		}
		file := filepath.Join(t.TempDir(), "heron.jsonl")
		if err := os.WriteFile(file, records.Bytes(), 0o600); err != nil {
			t.Fatal(err)
		}
		wantCode, want, _ := derateJSON(t, append([]string{"derate", sweeps, "--circuit", "cap-two-branch"}, conditions...)...)
		code, got, told := derateJSON(t, append([]string{"derate", file}, conditions...)...)
		if code != wantCode || code != 0 || told != "" {
			t.Fatalf("%s: exit %d, from the sweeps %d (%s)", sweeps, code, wantCode, told)
		}
		for _, name := range []string{"verdict", "lot", "part", "parts", "kind", "cautions", "voltage.verdict"} {
			a, _ := json.Marshal(at(got, name))
			if b, _ := json.Marshal(at(want, name)); !bytes.Equal(a, b) {
				t.Errorf("%s: %s is %s, from the sweeps %s", sweeps, name, a, b)
			}
		}
		compared := 0
		compare := func(name string) {
			a, ok := at(got, name).(float64)
			b, there := at(want, name).(float64)
			if ok != there || there && !(math.Abs(a-b) <= tolerance*math.Abs(b)) {
				t.Errorf("%s: %s is %v, from the sweeps %v", sweeps, name, at(got, name), at(want, name))
			}
			if there {
				compared++
			}
		}
		for _, name := range []string{"loss_w", "loss_low95_w", "loss_high95_w", "rise_k", "hot_spot_c", "hot_spot_low95_c", "hot_spot_high95_c", "margin_k",
			"max_ripple_a", "voltage.ripple_peak_v", "lot_statistics.worst_loss_w", "lot_statistics.mean_loss_w", "lot_statistics.sd_loss_w"} {
			compare(name)
		}
		harmonics, _ := at(want, "harmonics").([]any)
		for i := range harmonics {
			line := "harmonics." + strconv.Itoa(i) + "."
			for _, name := range []string{"esr_ohm", "esr_low95_ohm", "esr_high95_ohm", "loss_w"} {
				compare(line + name)
			}
			if in, of := at(got, line+"in_sweep"), at(want, line+"in_sweep"); in == nil || in != of {
				t.Errorf("%s: %sin_sweep is %v, from the sweeps %v", sweeps, line, in, of)
			}
		}
		if compared < 20 {
			t.Errorf("%s: only %d numbers compared", sweeps, compared)
		}
	}
}
