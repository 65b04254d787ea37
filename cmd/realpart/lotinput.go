package main

import (
	"bufio"
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"realpart/ingest"
	"realpart/models"
	"realpart/report"
)

// lotSource is where the parts of a lot come from: sweeps to be fitted, or the
// records of fits in JSON Lines.
type lotSource struct {
	name    string
	path    string // as given; "" of a list
	inputs  []ingest.Input
	records []*report.Fit
	fitted  []fitted // of the sweeps, in the order of the inputs
}

// fits are the records of the lot.
func (l *lotSource) fits() []*report.Fit {
	fits := slices.Clone(l.records)
	for _, r := range l.fitted {
		fits = append(fits, r.record)
	}
	return fits
}

// inputsOf lists the sweeps of lots.
func inputsOf(sources []*lotSource) []ingest.Input {
	var inputs []ingest.Input
	for _, l := range sources {
		inputs = append(inputs, l.inputs...)
	}
	return inputs
}

// splitName cuts NAME=PATH; a path that exists is one even with = in it.
func splitName(argument string) (name, path string) {
	if _, err := os.Stat(argument); err == nil {
		return "", argument
	}
	if name, path, ok := strings.Cut(argument, "="); ok && name != "" && path != "" {
		return name, path
	}
	return "", argument
}

// findLot opens a lot: a folder, a file with several parts, or a JSON Lines
// file of `fit --json`; - for standard input.
func (f *fitFlags) findLot(argument string, s streams) (*lotSource, error) {
	name, path := splitName(argument)
	l := &lotSource{name: name, path: path}
	if l.name == "" {
		l.name = lotName(path)
	}
	records, err := f.records(path, s)
	if err != nil {
		return nil, err
	}
	if records != nil {
		defer records.Close()
		if l.records, err = report.ReadJSON(records, path); err != nil {
			return nil, &exitError{exitFailure, err}
		}
		if len(l.records) == 0 {
			return nil, &exitError{exitFailure, fmt.Errorf("%s: expected lines of `realpart fit --json`, found none", path)}
		}
		return l, nil
	}
	if l.inputs, err = ingest.Find([]string{path}); err != nil {
		return nil, &exitError{exitFailure, err}
	}
	return l, nil
}

// lotName is the name of a lot that was not given one: that of the folder, or
// of the file without its ending.
func lotName(path string) string {
	if path == "-" {
		return path
	}
	if abs, err := filepath.Abs(path); err == nil {
		path = abs
	}
	if info, err := os.Stat(path); err == nil && info.IsDir() {
		return filepath.Base(path)
	}
	return partOf(path)
}

// records opens a file whose first character is that of a JSON object; nil for
// others.
func (f *readFlags) records(path string, s streams) (io.ReadCloser, error) {
	if path == "-" {
		text, err := f.standardInput(s)
		if err != nil {
			return nil, &exitError{exitFailure, err}
		}
		if !startsObject(text) {
			return nil, nil
		}
		return io.NopCloser(bytes.NewReader(text)), nil
	}
	info, err := os.Stat(path)
	if err != nil || info.IsDir() {
		return nil, nil // opening it as a sweep tells
	}
	file, err := os.Open(path)
	if err != nil {
		return nil, nil
	}
	r := bufio.NewReader(file)
	if start, _ := r.Peek(512); !startsObject(start) {
		file.Close()
		if !info.Mode().IsRegular() { // what was looked at is gone
			return nil, usagef("%s: expected lines of `realpart fit --json` from a pipe, found something else; give sweeps as files, or as - on standard input", path)
		}
		return nil, nil
	}
	return struct {
		io.Reader
		io.Closer
	}{r, file}, nil
}

func startsObject(text []byte) bool {
	return bytes.HasPrefix(bytes.TrimLeft(bytes.TrimPrefix(text, []byte("\ufeff")), " \t\r\n"), []byte("{"))
}

// standardInput reads standard input once, since a lot is gone through twice.
func (f *readFlags) standardInput(s streams) ([]byte, error) {
	f.stdin.once.Do(func() {
		f.stdin.text, f.stdin.err = io.ReadAll(io.LimitReader(s.in, ingest.DefaultMaxBytes+1))
		if f.stdin.err == nil && len(f.stdin.text) > ingest.DefaultMaxBytes {
			f.stdin.err = &ingest.Error{File: "-", Found: fmt.Sprintf("more than %d bytes", ingest.DefaultMaxBytes), Expected: "a sweep of smaller size", Err: ingest.ErrTooLarge}
		}
	})
	return f.stdin.text, f.stdin.err
}

// fitLots fits the sweeps of lots: with one circuit for all if one is set,
// else with one for each lot.
func (f *fitFlags) fitLots(sources []*lotSource, one bool, s streams) error {
	var groups []lot
	var owner []*lotSource // of each input
	for _, l := range sources {
		if len(l.inputs) == 0 {
			continue
		}
		for range l.inputs {
			owner = append(owner, l)
		}
		if one && len(groups) > 0 {
			groups[0].inputs = append(groups[0].inputs, l.inputs...)
		} else {
			groups = append(groups, lot{inputs: slices.Clone(l.inputs), one: true})
		}
	}
	if len(groups) == 0 {
		return nil
	}
	return f.batchLots(groups, s, func(r fitted) error {
		owner[r.input].fitted = append(owner[r.input].fitted, r)
		return nil
	})
}

// adopt takes the circuit of records that were fitted elsewhere for the sweeps
// beside them, if nothing else was asked for and the records agree.
func (f *fitFlags) adopt(sources []*lotSource) {
	if !f.chooses() {
		return
	}
	var circuit *report.Circuit
	for _, l := range sources {
		for _, r := range l.records {
			switch {
			case r.Circuit == nil:
			case circuit == nil:
				circuit = r.Circuit
			case circuit.Expression != r.Circuit.Expression:
				return
			}
		}
	}
	if circuit == nil {
		return
	}
	if parsed, err := models.Parse(circuit.Expression); err == nil {
		f.request.Circuit, f.request.Name = parsed, circuit.Name
	}
}

// told reports whether an error has been told already, as those of sweeps in
// a batch are; nil was.
func told(err error) bool {
	if err == nil {
		return true
	}
	exit, ok := err.(*exitError)
	return ok && exit.err == nil
}
