package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/spf13/pflag"

	"realpart/ingest"
)

// batchFlagsOf parses the flags of a command that fits.
func batchFlagsOf(t *testing.T, args ...string) *fitFlags {
	t.Helper()
	f := newFitFlags()
	flags := pflag.NewFlagSet("test", pflag.ContinueOnError)
	f.register(flags)
	if err := flags.Parse(args); err != nil {
		t.Fatal(err)
	}
	if err := f.check(); err != nil {
		t.Fatal(err)
	}
	return f
}

func read(t *testing.T, path string) []byte {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

// A run that is cut in either pass over a lot leaves what it has, and --resume
// ends with the bytes of a run that was not.
func TestBatchResumesAfterCut(t *testing.T) {
	inputs, err := ingest.Find([]string{"../../testdata/demo/heron"})
	if err != nil {
		t.Fatal(err)
	}
	quiet := streams{in: strings.NewReader(""), out: io.Discard, err: io.Discard}
	dir := t.TempDir()
	full := filepath.Join(dir, "full.jsonl")
	if err := batchFlagsOf(t, "--json-out", full).batch(inputs, quiet, func(fitted) error { return nil }); err != nil {
		t.Fatal(err)
	}
	want := read(t, full)

	out := filepath.Join(dir, "cut.jsonl")
	cut := errors.New("cut")
	n := 0
	err = batchFlagsOf(t, "--json-out", out).batch(inputs, quiet, func(fitted) error {
		if n++; n == 10 {
			return cut
		}
		return nil
	})
	if !errors.Is(err, cut) {
		t.Fatalf("got %v, want the run cut", err)
	}
	trials := read(t, out+trialsEnding)
	if lines := bytes.Count(read(t, out), []byte("\n")); lines != 10 {
		t.Fatalf("%d lines, want the 10 that were done", lines)
	}
	for _, c := range []struct {
		name   string
		change func()
		reused int
	}{
		{"in the second pass", func() {}, 10},
		{"in the first pass", func() {
			// Half of the trials, the last half-written, and no results yet.
			lines := bytes.SplitAfter(trials, []byte("\n"))
			half := append(bytes.Join(lines[:12], nil), lines[12][:50]...)
			if err := os.WriteFile(out+trialsEnding, half, 0o644); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(out, nil, 0o644); err != nil {
				t.Fatal(err)
			}
		}, 0},
	} {
		c.change()
		reused := 0
		if err := batchFlagsOf(t, "--json-out", out, "--resume").batch(inputs, quiet, func(r fitted) error {
			if r.held != nil {
				reused++
			}
			return nil
		}); err != nil {
			t.Fatalf("cut %s: %v", c.name, err)
		}
		if !bytes.Equal(read(t, out), want) {
			t.Errorf("cut %s: the resumed run has other bytes", c.name)
		}
		if reused != c.reused {
			t.Errorf("cut %s: %d results reused, want %d", c.name, reused, c.reused)
		}
		if _, err := os.Stat(out + trialsEnding); err == nil {
			t.Errorf("cut %s: the trials are left behind", c.name)
		}
	}
}

// A process that is killed outright leaves a file that --resume completes.
func TestKilledRunResumes(t *testing.T) {
	if testing.Short() {
		t.Skip("starts a process")
	}
	dir := t.TempDir()
	program := filepath.Join(dir, "realpart")
	if out, err := exec.Command("go", "build", "-o", program, ".").CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	run := func(args ...string) ([]byte, error) {
		return exec.Command(program, append([]string{"fit", "--jobs", "1"}, args...)...).CombinedOutput()
	}
	lots := []string{"../../testdata/demo/heron", "../../testdata/demo/otter"}
	full, out := filepath.Join(dir, "full.jsonl"), filepath.Join(dir, "killed.jsonl")
	if text, err := run(append(lots, "--json-out", full)...); err != nil {
		t.Fatalf("%v: %s", err, text)
	}
	killed := exec.Command(program, append([]string{"fit", "--jobs", "1", "--json-out", out}, lots...)...)
	if err := killed.Start(); err != nil {
		t.Fatal(err)
	}
	// Kill it when it has written something, wherever that is; a run that is
	// done before is a weaker test, but no failure.
	for range 2000 {
		if info, err := os.Stat(out); err == nil && info.Size() > 0 {
			break
		}
		time.Sleep(time.Millisecond)
	}
	killed.Process.Kill()
	killed.Wait()
	if text, err := run(append(lots, "--json-out", out, "--resume")...); err != nil {
		t.Fatalf("%v: %s", err, text)
	}
	if !bytes.Equal(read(t, out), read(t, full)) {
		t.Error("the resumed run has other bytes")
	}
}

// Everything that changes a result changes the digest of the settings, and
// nothing else does.
func TestBatchSettings(t *testing.T) {
	table := filepath.Join(t.TempDir(), "accuracy.csv")
	write := func(phase string) {
		text := "f_from,f_to,z_from,z_to,magnitude,phase\n1,1e9,1e-6,1e9,0.001," + phase + "\n"
		if err := os.WriteFile(table, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	write("0.001")
	plain := batchFlagsOf(t).settings()
	seen := []string{plain}
	for _, args := range [][]string{
		{"--from", "1kHz"}, {"--from", "1.0000001kHz"}, {"--at", "1kHz"}, {"--at", "1kHz,10kHz"}, {"--robust"}, {"--kind", "capacitor"},
		{"--circuit", "cap-leak"}, {"--circuit", "cap-leak", "--fix", "Rp=1MOhm"}, {"--circuit", "cap-leak", "--fix", "Rp=2MOhm"},
		{"--circuit", "cap-leak", "--start", "Rp=1MOhm"}, {"--circuit", "cap-leak", "--bounds", "Rp=1MOhm..2MOhm"},
		{"--accuracy", "0.1%"}, {"--accuracy", table}, {"--circuit-per-part"}, {"--columns", "f=1,z=2,phase=3"},
	} {
		s := batchFlagsOf(t, args...).settings()
		if slices.Contains(seen, s) {
			t.Errorf("%v: the digest is one that other settings have", args)
		}
		seen = append(seen, s)
	}
	write("0.002")
	if slices.Contains(seen, batchFlagsOf(t, "--accuracy", table).settings()) {
		t.Error("the content of the accuracy table does not count")
	}
	for _, args := range [][]string{{"--jobs", "3"}, {"--quiet"}, {"--json-out", "x"}, {"--files-from", "x"}} {
		if batchFlagsOf(t, args...).settings() != plain {
			t.Errorf("%v changes the digest", args)
		}
	}
}

// Inputs in a folder and in a list are lots, others are not.
func TestBatchLots(t *testing.T) {
	in := func(path, lot string) ingest.Input { return ingest.Input{Path: path, Display: path, Lot: lot} }
	f := batchFlagsOf(t)
	inputs := []ingest.Input{in("a", ""), in("b", ""), in("h/1", "h"), in("h/2", "h"), in("o/1", "o"), in("c", ""), in("x", ""), in("y", "z")}
	f.listed = 2
	var got []string
	for _, l := range f.lots(inputs) {
		var names []string
		for _, in := range l.inputs {
			names = append(names, in.Path)
		}
		got = append(got, fmt.Sprint(l.one, names))
	}
	want := []string{"false [a b]", "true [h/1 h/2]", "true [o/1]", "false [c]", "true [x y]"}
	if !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}
