package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"

	"realpart/fit"
	"realpart/ingest"
)

// firstPass is what the first pass over a lot found: its circuit, and the
// trials of every input, which lie in a file so that memory does not grow with
// the lot. With --json-out that file stands beside the output until the run is
// done, so that --resume goes on from it; else it is a temporary one.
type firstPass struct {
	file   *os.File
	spans  []span // of each input
	choice *fit.LotChoice
	keep   bool // the file for --resume
}

// trialsEnding is added to the name of the file of --json-out.
const trialsEnding = ".trials"

// trialLine is the line of an input in the file. A trial is null where the
// sweep could not be fitted.
type trialLine struct {
	Settings string       `json:"settings"`
	SHA256   string       `json:"sha256"`
	Trials   []*fit.Trial `json:"trials"`
}

// span is a part of a file.
type span struct{ from, length int64 }

// tryAll runs the first pass over a lot.
func (b *batch) tryAll(l lot) (*firstPass, error) {
	p := new(firstPass)
	earlier := map[string]span{} // by content
	var err error
	if b.store == nil {
		if p.file, err = os.CreateTemp("", "realpart-trials-"); err == nil {
			os.Remove(p.file.Name()) // where an open file can be: nothing stays behind, however the program ends
		}
	} else {
		flags := os.O_RDWR | os.O_CREATE
		if !b.resume && !b.tried {
			flags |= os.O_TRUNC
		}
		p.keep = true
		if err := checkTrials(b.jsonOut + trialsEnding); err != nil {
			return nil, err
		}
		p.file, err = os.OpenFile(b.jsonOut+trialsEnding, flags, 0o644)
	}
	defer func() { b.tried = true }()
	if err != nil {
		return nil, &exitError{exitUsage, fmt.Errorf("cannot write the trials of the lot: %w", err)}
	}
	size := int64(0)
	if b.resume || b.tried && p.keep {
		if size, err = p.load(earlier, b.store.settings); err != nil {
			p.Close()
			return nil, err
		}
	}
	type result struct {
		line []byte // nil if the file has it already
		span span
		tl   trialLine
	}
	bar := b.newBar("choosing the circuit", len(l.inputs))
	defer bar.finish()
	settings := ""
	if b.store != nil {
		settings = b.store.settings
	}
	tally := new(fit.Tally)
	err = fit.InOrder(context.Background(), len(l.inputs), b.jobs,
		func(i int) (r result) {
			sweeps, err := b.open(l.inputs[i], b.s)
			bar.grow(len(sweeps) - 1)
			r.tl.Settings = settings
			if err != nil {
				bar.add() // the second pass tells
			}
			if len(sweeps) > 0 {
				r.tl.SHA256 = sweeps[0].SHA256
				if at, ok := earlier[r.tl.SHA256]; ok {
					if line, err := p.read(at); err == nil && len(line.Trials) == len(sweeps) {
						for range sweeps {
							bar.add()
						}
						return result{nil, at, line}
					}
				}
			}
			for _, sweep := range sweeps {
				r.tl.Trials = append(r.tl.Trials, b.try(sweep))
				bar.add()
			}
			r.line, err = json.Marshal(r.tl)
			if err != nil {
				panic("realpart: trials: " + err.Error()) // they hold finite numbers only
			}
			r.line = append(r.line, '\n')
			return r
		},
		func(_ int, r result) error {
			for _, t := range r.tl.Trials {
				if t != nil {
					tally.Add(t)
				}
			}
			if r.line != nil {
				if _, err := p.file.WriteAt(r.line, size); err != nil {
					return fmt.Errorf("cannot write the trials of the lot: %w", err)
				}
				r.span = span{size, int64(len(r.line))}
				size += r.span.length
			}
			p.spans = append(p.spans, r.span)
			return nil
		})
	if err != nil {
		p.Close()
		return nil, err
	}
	p.choice = tally.Choose()
	return p, nil
}

// checkTrials refuses to write over a file that is something else.
func checkTrials(path string) error {
	file, err := os.Open(path)
	if err != nil {
		return nil // there is none, or opening it for writing will tell
	}
	defer file.Close()
	first, err := bufio.NewReader(file).ReadBytes('\n')
	var t trialLine
	if err == nil && json.Unmarshal(first, &t) != nil {
		return usagef("--json-out: expected no file %s, or one that an earlier run left, found another; move it away", path)
	}
	return nil
}

// load finds the lines of an interrupted run and returns where to go on; a
// half-written last line is overwritten.
func (p *firstPass) load(earlier map[string]span, settings string) (int64, error) {
	size := int64(0)
	r := bufio.NewReader(p.file)
	for {
		line, err := r.ReadBytes('\n')
		if errors.Is(err, io.EOF) {
			return size, p.file.Truncate(size)
		}
		if err != nil {
			return 0, err
		}
		var t trialLine
		if json.Unmarshal(line, &t) == nil && t.Settings == settings && t.SHA256 != "" {
			earlier[t.SHA256] = span{size, int64(len(line))}
		}
		size += int64(len(line))
	}
}

func (p *firstPass) read(at span) (t trialLine, err error) {
	line := make([]byte, at.length)
	if _, err := p.file.ReadAt(line, at.from); err != nil {
		return t, err
	}
	return t, json.Unmarshal(bytes.TrimSpace(line), &t)
}

// at returns the trials of an input's sweeps.
func (p *firstPass) at(i int, sweeps []*ingest.Sweep) ([]*fit.Trial, error) {
	t, err := p.read(p.spans[i])
	if err != nil {
		return nil, fmt.Errorf("the trials of the first pass: %w", err)
	}
	if len(t.Trials) != len(sweeps) || t.SHA256 != sweeps[0].SHA256 {
		return nil, errors.New("expected the file that the circuit was chosen with, found that it has changed meanwhile; run again")
	}
	return t.Trials, nil
}

func (p *firstPass) Close() {
	p.file.Close()
	if !p.keep {
		os.Remove(p.file.Name())
	}
}
