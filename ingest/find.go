package ingest

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// Input is a file to open.
type Input struct {
	Path    string // for Open
	Display string // as in Sweep.File: the path as given, joined with the path below a folder
	Lot     string // the folder's name, "" for a file
}

// Open reads the input; see [Open].
func (in Input) Open(o *Options) ([]*Sweep, error) {
	sweeps, err := Open(in.Path, o)
	for _, s := range sweeps {
		// The folder makes the lot, whatever a file says (Metadata.Lot keeps it).
		if in.Lot != "" {
			s.Lot = in.Lot
		}
	}
	return sweeps, err
}

// sweepEndings are those that a folder is searched for, in any case.
var sweepEndings = []string{".csv", ".tsv", ".txt", ".dat", ".s1p", ".s2p", ".ts", ".xlsx"}

func hasSweepEnding(name string) bool {
	return slices.Contains(sweepEndings, strings.ToLower(filepath.Ext(name)))
}

// Find expands folders. A folder means the files below it with the ending of a
// sweep (.csv .tsv .txt .dat .s1p .s2p .ts .xlsx, in any case), in byte order
// of their paths with / between the names. Links to files are followed, links to
// folders are not, so that there are no loops; devices and pipes in a folder are
// left out. Two files of a folder that hold the magnitude and the phase of one
// sweep become one input. Anything that is not a folder, "-" included, stands
// for itself, whether it exists or not; a folder without sweeps does too, so that
// Open says so. The error is that of a folder that cannot be listed.
func Find(paths []string) ([]Input, error) {
	var out []Input
	for _, p := range paths {
		info, err := os.Stat(p)
		if p == "-" || err != nil || !info.IsDir() {
			out = append(out, Input{Path: p, Display: p})
			continue
		}
		files, err := below(p)
		if err != nil {
			return out, err
		}
		if len(files) == 0 {
			out = append(out, Input{Path: p, Display: p})
			continue
		}
		lot := folderName(p)
		out = slices.Grow(out, len(files))
		for _, f := range joinTwins(files) {
			out = append(out, Input{Path: f, Display: f, Lot: lot})
		}
	}
	return out, nil
}

// folderName is the name of a folder as a lot.
func folderName(p string) string {
	if abs, err := filepath.Abs(p); err == nil {
		return filepath.Base(abs)
	}
	return filepath.Base(p)
}

// below lists the sweep files of a folder in byte order.
func below(folder string) ([]string, error) {
	var found []string
	// Walking the resolved folder lets a link be given by name.
	root := folder
	if r, err := filepath.EvalSymlinks(folder); err == nil {
		root = r
	}
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return &Error{File: folder, Found: err.Error(), Expected: "a folder that can be listed", Err: err}
		}
		if d.IsDir() || !hasSweepEnding(d.Name()) {
			return nil
		}
		switch {
		case d.Type()&fs.ModeSymlink != 0:
			// A broken link stays in the list: opening it says so.
			if info, err := os.Stat(path); err == nil && !info.Mode().IsRegular() {
				return nil
			}
		case !d.Type().IsRegular():
			return nil
		}
		if root != folder {
			rel, err := filepath.Rel(root, path)
			if err != nil {
				return err
			}
			path = filepath.Join(folder, rel)
		}
		found = append(found, filepath.Clean(path))
		return nil
	})
	if err != nil {
		return nil, err
	}
	// All begin with the folder, so that what comes after it decides.
	slices.SortFunc(found, func(a, b string) int { return strings.Compare(filepath.ToSlash(a), filepath.ToSlash(b)) })
	return found, nil
}

// Open reads the sweeps of a file, or of standard input for "-". The path may
// name a sheet of a spreadsheet ("lot.xlsx#second") or the two files of one
// sweep ("mag.csv+phase.csv"). A file that holds only a magnitude or only a
// phase is read together with the one beside it whose name differs in just that
// (…MAG… and …ANG… or …PHASE…).
func Open(path string, o *Options) ([]*Sweep, error) {
	opt := o.orDefault()
	if path == "-" {
		return Read(path, os.Stdin, o)
	}
	if strings.IndexByte(path, '+') >= 0 && !exists(path) {
		if one, two, ok := splitPair(path); ok {
			return openPair(path, one, two, opt)
		}
	}
	data, err := readFile(path, opt)
	if err != nil {
		return nil, err
	}
	parsed, err := parseFile(path, data, opt)
	if err != nil {
		return nil, err
	}
	if len(parsed.halves) == 1 && len(parsed.parts) == 0 && len(parsed.faults) == 0 {
		if twin := findTwin(path); twin != "" {
			return openPair(path, path, twin, opt)
		}
	}
	return parsed.finished(data, opt)
}

func exists(path string) bool {
	_, err := os.Lstat(path)
	return err == nil
}

// readFile reads a regular file or a pipe.
func readFile(path string, o Options) ([]byte, error) {
	file, _ := splitSheet(path)
	if file != path && exists(path) {
		file = path
	}
	bad := func(found, expected, hint string, err error) ([]byte, error) {
		return nil, &Error{File: path, Found: found, Expected: expected, Hint: hint, Err: err, bare: true}
	}
	info, err := os.Stat(file)
	if err != nil {
		var pathErr *fs.PathError
		text := err.Error()
		if errors.As(err, &pathErr) {
			text = pathErr.Err.Error()
		}
		return bad(text, "a file", "", err)
	}
	switch mode := info.Mode(); {
	case mode.IsDir():
		return bad("a folder without any", "files that end in "+strings.Join(sweepEndings, ", "), "", fs.ErrInvalid)
	case mode&(fs.ModeDevice|fs.ModeSocket|fs.ModeIrregular) != 0:
		return bad("a device", "a file", "- for standard input", fs.ErrInvalid)
	case mode.IsRegular() && info.Size() > o.MaxBytes:
		return nil, tooLarge(path, o.MaxBytes)
	}
	f, err := os.Open(file)
	if err != nil {
		return bad(err.Error(), "a readable file", "", err)
	}
	defer f.Close()
	if !info.Mode().IsRegular() {
		return readAll(path, f, o.MaxBytes)
	}
	data, err := slurp(f, info.Size(), o.MaxBytes)
	switch {
	case errors.Is(err, ErrTooLarge): // it grew meanwhile
		return nil, tooLarge(path, o.MaxBytes)
	case err != nil:
		return bad(err.Error(), "a readable file", "", err)
	}
	return data, nil
}
