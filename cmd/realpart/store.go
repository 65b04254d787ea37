package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"

	"realpart/fit"
	"realpart/ingest"
	"realpart/report"
)

// store is the file of --json-out. Each record is appended as soon as it is
// there, so that a run that was cut short loses only what it was working on;
// --resume finds the lines by the content of the sweeps and the settings.
type store struct {
	path     string
	file     *os.File
	size     int64
	settings string
	held     map[string]held // from an earlier run
	order    []span          // of the lines of this run, in the order of the inputs
	plain    bool            // a pipe or device: lines only go there
	line     []byte          // of add
}

// held is a record that the file has from an earlier run.
type held struct {
	span
	circuit string // expression
}

func openStore(path, settings string, resume bool) (*store, error) {
	s := &store{path: path, settings: settings, held: map[string]held{}}
	flags := os.O_RDWR | os.O_CREATE
	if info, err := os.Stat(path); err == nil && !info.Mode().IsRegular() {
		if resume {
			return nil, usagef("--resume: expected --json-out with a file, found %q, which is none", path)
		}
		s.plain, flags = true, os.O_WRONLY
	} else if !resume {
		flags |= os.O_TRUNC
	}
	var err error
	if s.file, err = os.OpenFile(path, flags, 0o644); err != nil {
		return nil, usagef("--json-out: cannot write %s: %w", path, cause(err))
	}
	if resume {
		if err := s.load(); err != nil {
			s.file.Close()
			return nil, err
		}
	}
	return s, nil
}

// load finds the records of earlier runs that converged with the same
// settings; others are fitted again. A half-written last line is cut off.
func (s *store) load() error {
	r := bufio.NewReader(s.file)
	for n := 1; ; n++ {
		text, err := r.ReadBytes('\n')
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return usagef("--json-out: cannot read %s: %w", s.path, err)
		}
		// Of the record, little is needed here.
		var line struct {
			Schema   string
			Settings string
			Status   report.Status
			Circuit  report.Circuit
			Sweep    struct{ Part, SHA256 string }
		}
		if err := json.Unmarshal(text, &line); err != nil || line.Schema != report.Schema {
			return usagef("--resume: expected lines of `realpart fit --json-out` in %s, found another at line %d; give another --json-out or run without --resume", s.path, n)
		}
		if line.Settings == s.settings && line.Status == report.Converged {
			s.held[key(line.Sweep.SHA256, line.Sweep.Part)] = held{span{s.size, int64(len(text))}, line.Circuit.Expression}
		}
		s.size += int64(len(text))
	}
	if err := s.file.Truncate(s.size); err != nil {
		return usagef("--json-out: cannot write %s: %w", s.path, cause(err))
	}
	return nil
}

func key(sha256, part string) string { return sha256 + " " + part }

// add writes the line of a result and the digest of the settings that it was
// made with, unless the file holds it.
func (s *store) add(r fitted) error {
	if r.held != nil {
		s.order = append(s.order, r.held.span)
		return nil
	}
	// The line is the record with one member more.
	s.line = append(s.line[:0], bytes.TrimSuffix(r.line, []byte("}\n"))...)
	s.line = append(s.line, `,"settings":"`...)
	s.line = append(s.line, s.settings...) // hexadecimal digits
	s.line = append(s.line, "\"}\n"...)
	var err error
	if s.plain {
		_, err = s.file.Write(s.line)
	} else {
		_, err = s.file.WriteAt(s.line, s.size)
		s.order = append(s.order, span{s.size, int64(len(s.line))})
		s.size += int64(len(s.line))
	}
	if err != nil {
		return fmt.Errorf("cannot write %s: %w", s.path, cause(err))
	}
	return nil
}

// finish brings the lines into the order of the inputs if a resumed run has
// others between them.
func (s *store) finish() error {
	if s.plain {
		return nil
	}
	at := int64(0)
	for _, line := range s.order {
		if line.from != at {
			return writeFile(s.path, func(w io.Writer) error {
				for _, line := range s.order {
					if _, err := io.Copy(w, io.NewSectionReader(s.file, line.from, line.length)); err != nil {
						return err
					}
				}
				return nil
			})
		}
		at += line.length
	}
	return s.file.Truncate(at)
}

func (s *store) Close() { s.file.Close() }

// reuse returns the record of a sweep that the file of --json-out holds; if a
// circuit was chosen for its lot, only one with that circuit.
func (b *batch) reuse(sweep *ingest.Sweep, trial *fit.Trial, choice *fit.LotChoice) (fitted, bool) {
	if b.store == nil || len(b.store.held) == 0 {
		return fitted{}, false
	}
	h, ok := b.store.held[key(sweep.SHA256, sweep.Part)]
	if !ok {
		return fitted{}, false
	}
	if choice != nil && (trial == nil || trial.Kind != choice.Kind ||
		choice.Circuits[choice.Kind].Model.Circuit.String() != h.circuit) {
		return fitted{}, false
	}
	text := make([]byte, h.length)
	if _, err := b.store.file.ReadAt(text, h.from); err != nil {
		return fitted{}, false
	}
	fits, err := report.ReadJSON(bytes.NewReader(text), b.store.path)
	if err != nil || len(fits) != 1 {
		return fitted{}, false
	}
	r := fitted{record: fits[0], sweep: sweep}
	if r.record.Sweep.File == sweep.File && r.record.Sweep.Lot == sweep.Lot {
		r.held = &h
	} else { // the same content in another place
		r.record.Sweep.File, r.record.Sweep.Lot = sweep.File, sweep.Lot
	}
	return r, true
}

// holds tells whether the file holds the results of all sweeps and no others,
// so that no circuit has to be chosen. (A run that was cut short left its
// trials, from which it goes on.)
func (b *batch) holds(lots []lot) bool {
	if len(b.store.held) == 0 {
		return false
	}
	if _, err := os.Stat(b.jsonOut + trialsEnding); err == nil {
		return false
	}
	found := map[string]bool{}
	for _, l := range lots {
		for _, in := range l.inputs {
			sweeps, err := b.open(in, b.s)
			if err != nil {
				return false
			}
			for _, sweep := range sweeps {
				k := key(sweep.SHA256, sweep.Part)
				if _, ok := b.store.held[k]; !ok {
					return false
				}
				found[k] = true
			}
		}
	}
	return len(found) == len(b.store.held)
}
