package main

import (
	"bufio"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"realpart/ingest"
)

// batchFlags say which sweeps make up a batch and how it runs.
type batchFlags struct {
	filesFrom, jsonOut string
	resume, perPart    bool
	quiet              bool
	streaming          bool // results go to standard output as they come
	listed             int  // the last so many inputs come from --files-from
}

func (f *batchFlags) register(flags *pflag.FlagSet) {
	flags.StringVar(&f.filesFrom, "files-from", "", "read a list of sweep files, one a line, from `FILE`; - for standard input")
	flags.StringVar(&f.jsonOut, "json-out", "", "write JSON Lines to `FILE` as the fits are done, instead of reports on standard output")
	flags.BoolVar(&f.resume, "resume", false, "with --json-out: skip the sweeps that the file already holds")
	flags.BoolVar(&f.perPart, "circuit-per-part", false, "in a lot, choose the circuit for each part on its own")
	flags.BoolVar(&f.quiet, "quiet", false, "no progress, no cautions")
}

func (f *batchFlags) check() error {
	if f.resume && f.jsonOut == "" {
		return usagef("--resume: expected --json-out FILE with the file to resume, found none")
	}
	return nil
}

// arguments wants at least one sweep.
func (f *batchFlags) arguments(_ *cobra.Command, args []string) error {
	if len(args) == 0 && f.filesFrom == "" {
		return usagef("expected a sweep file, a folder or -, found none")
	}
	if f.filesFrom == "-" && slices.Contains(args, "-") {
		return usagef("--files-from -: expected one use of standard input, found - among the sweeps too")
	}
	return nil
}

// outputs adds the files that the batch writes to those of a command.
func (f *batchFlags) outputs(files map[string]string) map[string]string {
	if f.jsonOut != "" {
		files["--json-out"] = f.jsonOut
	}
	return files
}

// find lists the sweeps of the arguments and of --files-from.
func (f *batchFlags) find(args []string, s streams) ([]ingest.Input, error) {
	inputs, err := ingest.Find(args)
	if err != nil {
		return nil, &exitError{exitFailure, err}
	}
	if f.filesFrom == "" {
		return inputs, nil
	}
	names, err := readList(f.filesFrom, s.in)
	if err != nil {
		return nil, err
	}
	listed, err := ingest.Find(names)
	if err != nil {
		return nil, &exitError{exitFailure, err}
	}
	f.listed = len(listed)
	inputs = append(inputs, listed...)
	if len(inputs) == 0 {
		return nil, usagef("--files-from %s: expected sweep files, one a line, found none", f.filesFrom)
	}
	return inputs, nil
}

// readList reads names, one a line; empty lines are passed over.
func readList(name string, stdin io.Reader) ([]string, error) {
	r := stdin
	if name != "-" {
		file, err := os.Open(name)
		if err != nil {
			return nil, usagef("--files-from: expected a list of sweep files, found %q: %w", name, cause(err))
		}
		defer file.Close()
		r = file
	}
	var names []string
	lines := bufio.NewScanner(r)
	lines.Buffer(nil, 1<<20)
	for n := 1; lines.Scan(); n++ {
		line := strings.TrimRight(lines.Text(), "\r")
		if n == 1 {
			line = strings.TrimPrefix(line, "\ufeff")
		}
		switch {
		case strings.TrimSpace(line) == "":
		case line == "-":
			return nil, usagef("--files-from %s:%d: expected the name of a file, found -", name, n)
		case strings.ContainsRune(line, 0):
			return nil, usagef("--files-from %s:%d: expected a name a line, found a zero byte; try: find … -print, not -print0", name, n)
		default:
			names = append(names, line)
		}
	}
	if err := lines.Err(); err != nil {
		return nil, usagef("--files-from %s: expected a list of sweep files, one a line: %w", name, err)
	}
	return names, nil
}

// lot is a run of inputs that get one circuit: a folder, or what --files-from
// lists; or one of inputs that stand for themselves. A file with several parts
// is a lot too, which is known only when it is read.
type lot struct {
	inputs []ingest.Input
	one    bool // one circuit for all
}

// lots groups inputs. The lots share their memory.
func (f *fitFlags) lots(inputs []ingest.Input) []lot {
	type group struct {
		listed bool
		folder string
	}
	list := len(inputs) - f.listed
	of := func(i int) group {
		if i >= list {
			return group{listed: true}
		}
		return group{folder: inputs[i].Lot}
	}
	var out []lot
	for from := 0; from < len(inputs); {
		to := from + 1
		for to < len(inputs) && of(to) == of(from) {
			to++
		}
		out = append(out, lot{inputs[from:to:to], of(from) != group{}})
		from = to
	}
	return out
}

// chooses tells whether the circuits of lots are to be chosen.
func (f *fitFlags) chooses() bool { return f.request.Circuit == nil && !f.perPart }

// withoutInfluence lists the flags that don't change a result.
var withoutInfluence = []string{"jobs", "files-from", "json-out", "resume", "quiet", "show-reading", "help"}

// settings is a digest of everything but the sweep that a result depends on:
// the flags, the contents of the files that they name, and the program's
// version.
func (f *fitFlags) settings() string {
	h := sha256.New()
	fmt.Fprintf(h, "realpart %s\n", buildVersion())
	f.flags.VisitAll(func(flag *pflag.Flag) {
		if slices.Contains(withoutInfluence, flag.Name) || !f.isShared(flag.Name) {
			return
		}
		text := flag.Value.String()
		if v, ok := flag.Value.(interface{ settings() string }); ok {
			text = v.settings()
		}
		fmt.Fprintf(h, "%s=%s\n", flag.Name, text)
		if file, err := os.ReadFile(text); err == nil && text != "" { // an accuracy table, a fixture sweep
			fmt.Fprintf(h, "%x\n", sha256.Sum256(file))
		}
	})
	return hex.EncodeToString(h.Sum(nil)[:12])
}

// isShared tells the flags of all commands that fit from those of one command,
// which say how a result is shown.
func (f *fitFlags) isShared(name string) bool {
	if f.shared == nil {
		f.shared = pflag.NewFlagSet("shared", pflag.ContinueOnError)
		newFitFlags().register(f.shared)
	}
	return f.shared.Lookup(name) != nil
}
