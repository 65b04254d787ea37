package ingest

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
)

const smallSweep = "Frequency (Hz),R (Ohm),X (Ohm)\n100,1,-2\n1000,1,-3\n10000,1,4\n"

func write(t *testing.T, path, text string) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
}

func TestFind(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("links and pipes need a POSIX system")
	}
	dir := t.TempDir()
	lot := filepath.Join(dir, "lot-heron")
	for _, f := range []string{"c2.csv", "c10.csv", "a/b.csv", "a.csv", "a-b.TSV", "deep/er/x.s1p", "x.S2P", "y.ts", "z.dat", "w.txt", "v.xlsx", "notes.md", "image.png", "csv", "Ä.csv"} {
		write(t, filepath.Join(lot, f), smallSweep)
	}
	write(t, filepath.Join(dir, "outside", "linked.csv"), smallSweep)
	link := func(to, at string) {
		t.Helper()
		if err := os.Symlink(to, filepath.Join(lot, at)); err != nil {
			t.Fatal(err)
		}
	}
	link(filepath.Join(dir, "outside", "linked.csv"), "link.csv") // followed
	link(filepath.Join(dir, "outside"), "folder")                 // not followed
	link(filepath.Join(dir, "outside"), "folder.csv")             // neither, whatever its name
	link(lot, "loop")
	link("gone.csv", "broken.csv") // kept, so that opening says so
	if err := os.Mkdir(filepath.Join(lot, "dir.csv"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := syscall.Mkfifo(filepath.Join(lot, "pipe.csv"), 0o600); err != nil {
		t.Fatal(err)
	}
	t.Chdir(dir)
	in, err := Find([]string{"lot-heron", "-", "lot-heron/c2.csv", "missing.csv"})
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, i := range in {
		got = append(got, i.Lot+"|"+filepath.ToSlash(i.Display))
		if i.Path != i.Display {
			t.Errorf("path %q, display %q", i.Path, i.Display)
		}
	}
	// Byte order of the whole path: '-' < '.' < '/' < digits < letters.
	want := []string{"lot-heron|lot-heron/a-b.TSV", "lot-heron|lot-heron/a.csv", "lot-heron|lot-heron/a/b.csv", "lot-heron|lot-heron/broken.csv",
		"lot-heron|lot-heron/c10.csv", "lot-heron|lot-heron/c2.csv", "lot-heron|lot-heron/deep/er/x.s1p", "lot-heron|lot-heron/link.csv",
		"lot-heron|lot-heron/v.xlsx", "lot-heron|lot-heron/w.txt", "lot-heron|lot-heron/x.S2P", "lot-heron|lot-heron/y.ts", "lot-heron|lot-heron/z.dat",
		"lot-heron|lot-heron/Ä.csv", "|-", "|lot-heron/c2.csv", "|missing.csv"}
	if d := cmp.Diff(want, got); d != "" {
		t.Error(d)
	}
	// The name of a folder given as a dot or with a slash at the end.
	t.Chdir(lot)
	for _, p := range []string{".", "../lot-heron/", "loop"} {
		in, err := Find([]string{p})
		if err != nil || len(in) != 14 {
			t.Errorf("%s: %d inputs, %v", p, len(in), err)
			continue
		}
		if want := map[bool]string{true: "loop", false: "lot-heron"}[p == "loop"]; in[0].Lot != want {
			t.Errorf("%s: lot %q, want %q", p, in[0].Lot, want)
		}
	}
}

func TestOpen(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	write(t, "lot/c017.csv", smallSweep)
	write(t, "a+b.csv", smallSweep)
	write(t, "w#1.xlsx", string(workbook(t, map[string][][]any{"A": sheetRows([]any{"f (Hz)", "Z (Ohm)", "Phase (deg)"}), "B": {{"nothing"}}}, []string{"A", "B"})))
	for path, part := range map[string]string{"lot/c017.csv": "c017", "a+b.csv": "a+b", "w#1.xlsx": "w#1", "w#1.xlsx#A": "w#1", "w#1.xlsx#a": "w#1"} {
		s, err := Open(path, nil)
		if err != nil || len(s) != 1 || s[0].Part != part || s[0].File != path {
			t.Errorf("%s: %v %v", path, s, err)
		}
	}
	if err := os.Mkdir("empty", 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile("fake.xlsx", []byte("PK\x03\x04 broken"), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile("old.xls", []byte("\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1 old"), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile("binary.csv", []byte("\x00\x01\x02\x03\x00\x00\x00"), 0o600); err != nil {
		t.Fatal(err)
	}
	for path, want := range map[string]string{
		"missing.csv":      "missing.csv: expected a file, found no such file or directory",
		"empty":            "empty: expected files that end in .csv, .tsv, .txt, .dat, .s1p, .s2p, .ts, .xlsx, found a folder without any",
		"w#1.xlsx#C":       `w#1.xlsx#C: expected a sheet of A, B, found no "C"`,
		"w#1.xlsx#B":       `w#1.xlsx#B:1:1: expected a header with a frequency column and rows of numbers, found "nothing"; try: --columns 'f=1,z=2,phase=3' with the columns' numbers`,
		"fake.xlsx":        "fake.xlsx: expected a spreadsheet (.xlsx), found zip: not a valid zip file; try: save it again, or export CSV",
		"old.xls":          "old.xls: expected text or a spreadsheet, found an old or encrypted document; try: save as .xlsx without password, or as CSV",
		"binary.csv":       "binary.csv:1:1: expected text or a spreadsheet, found a binary file; try: export the sweep as CSV or Touchstone",
		"/dev/null":        "/dev/null: expected a file, found a device; try: - for standard input",
		"lot/c017.csv/x":   "lot/c017.csv/x: expected a file, found not a directory",
		"no.csv+other.csv": "no.csv: expected a file, found no such file or directory",
	} {
		if _, err := Open(path, nil); err == nil || err.Error() != want {
			t.Errorf("%s:\n got %v\nwant %s", path, err, want)
		}
	}
	if _, err := Open("missing.csv", nil); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("missing: %v", err)
	}
}

func TestSizeLimit(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "big.csv")
	write(t, path, smallSweep)
	o := &Options{MaxBytes: int64(len(smallSweep))}
	if _, err := Open(path, o); err != nil {
		t.Errorf("at the limit: %v", err)
	}
	o.MaxBytes--
	_, err := Open(path, o)
	if !errors.Is(err, ErrTooLarge) || !strings.Contains(err.Error(), "found more than 59 bytes; try: split the file") {
		t.Errorf("above the limit: %v", err)
	}
	if _, err := Read("-", strings.NewReader(smallSweep), o); !errors.Is(err, ErrTooLarge) {
		t.Errorf("stream above the limit: %v", err)
	}
	// A spreadsheet that unpacks to more than the limit.
	book := workbook(t, map[string][][]any{"A": sheetRows([]any{"f (Hz)", "Z (Ohm)", "Phase (deg)"})}, []string{"A"})
	if _, err := Read("a.xlsx", strings.NewReader(string(book)), &Options{MaxBytes: int64(len(book))}); err == nil {
		t.Error("a spreadsheet that unpacks to more than the limit was read")
	}
}

// A pipe is read like standard input.
func TestOpenPipe(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("pipes in the file system need a POSIX system")
	}
	path := filepath.Join(t.TempDir(), "pipe")
	if err := syscall.Mkfifo(path, 0o600); err != nil {
		t.Fatal(err)
	}
	done := make(chan error, 1)
	go func() { done <- os.WriteFile(path, []byte(smallSweep), 0o600) }()
	s, err := Open(path, nil)
	if err != nil || len(s) != 1 || len(s[0].Freq) != 3 {
		t.Errorf("%v %v", s, err)
	}
	select {
	case err := <-done:
		if err != nil {
			t.Error(err)
		}
	case <-time.After(10 * time.Second):
		t.Error("the writer hangs")
	}
}

// Two files of one sweep, in their various names.
func TestPairs2(t *testing.T) {
	t.Chdir(t.TempDir())
	freq, z := referenceSweep()
	_ = freq
	mag := textTable("Frequency,Formatted Data,Formatted Data", ", ", func(f float64, z complex128) []float64 { return []float64{f, polarDeg(f, z)[1], 0} })
	ang := textTable("Frequency,Formatted Data,Formatted Data", ", ", func(f float64, z complex128) []float64 { return []float64{f, polarDeg(f, z)[2], 0} })
	write(t, "lot/c1_MAG.csv", mag)
	write(t, "lot/c1_PHASE.csv", ang)
	write(t, "lot/mag-c2.txt", mag)
	write(t, "lot/angle-c2.txt", ang)
	write(t, "lot/c3_mag.csv", smallSweep) // complete: no halves
	write(t, "lot/c3_ang.csv", smallSweep)
	write(t, "m.csv", textTable("Freq (Hz),|Z| (Ohm)", ",", func(f float64, z complex128) []float64 { return polarDeg(f, z)[:2] }))
	write(t, "p.csv", textTable("Freq (kHz),Phase (rad)", ",", func(f float64, z complex128) []float64 { return []float64{f / 1e3, polarRad(f, z)[2]} }))
	write(t, "short_ang.csv", "Frequency,Data\n100,-90\n")
	write(t, "short_mag.csv", "Frequency,Data\n200,5\n")
	in, err := Find([]string{"lot"})
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, i := range in {
		got = append(got, filepath.ToSlash(i.Path))
	}
	want := []string{"lot/mag-c2.txt+lot/angle-c2.txt", "lot/c1_MAG.csv+lot/c1_PHASE.csv", "lot/c3_ang.csv", "lot/c3_mag.csv"}
	if d := cmp.Diff(want, got); d != "" {
		t.Error(d)
	}
	for _, path := range []string{"lot/c1_MAG.csv", "lot/c1_PHASE.csv", "lot/mag-c2.txt+lot/angle-c2.txt", "lot/mag-c2.txt+angle-c2.txt", "m.csv+p.csv", "p.csv+m.csv"} {
		s, err := Open(path, nil)
		if err != nil {
			t.Errorf("%s: %v", path, err)
			continue
		}
		for i := range z {
			if !near(s[0].Z[i], z[i], 3e-8) {
				t.Errorf("%s: Z = %v, want %v", path, s[0].Z[i], z[i])
				break
			}
		}
	}
	for path, want := range map[string]string{
		"m.csv":                       `m.csv:1:1: expected two columns that give an impedance, found frequency and |Z| only; try: the file with the other quantity behind a plus: mag.csv+phase.csv`,
		"short_mag.csv":               `short_ang.csv:2:1: expected the same frequencies as in short_mag.csv, found others; try: files of the same sweep`,
		"m.csv+m.csv":                 `m.csv:1:1: expected two files that hold a magnitude and a phase, found |Z| and |Z|; try: file names or headers that say MAG and PHASE`,
		"lot/c3_mag.csv+m.csv":        `lot/c3_mag.csv:1:1: expected a file with frequency and one quantity, found a sweep of its own; try: the two files one by one`,
		"lot/c1_MAG.csv+lot/gone.csv": `lot/gone.csv: expected a file, found no such file or directory`,
	} {
		if _, err := Open(path, nil); err == nil || err.Error() != want {
			t.Errorf("%s:\n got %v\nwant %s", path, err, want)
		}
	}
}
