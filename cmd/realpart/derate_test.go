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
