package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/signal"
	"path/filepath"
	"slices"
	"strings"
	"syscall"

	"github.com/google/renameio/v2"

	"realpart/ingest"
)

// writeFile writes an output whole or not at all: to a temporary file beside
// it, which takes its place when everything is written. A signal that ends the
// program takes the temporary file away.
func writeFile(path string, write func(io.Writer) error) error {
	info, err := os.Stat(path)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return cannotWrite(path, err)
	}
	if err == nil && !info.Mode().IsRegular() {
		// A pipe or device can't be replaced; /dev/stdout is a common wish.
		f, err := os.OpenFile(path, os.O_WRONLY, 0)
		if err != nil {
			return cannotWrite(path, err)
		}
		if err := errors.Join(write(f), f.Close()); err != nil {
			return cannotWrite(path, err)
		}
		return nil
	}
	target := followed(path) // a link stays a link
	f, err := renameio.NewPendingFile(target, renameio.WithTempDir(filepath.Dir(target)), renameio.WithPermissions(0o644), renameio.WithExistingPermissions())
	if err != nil {
		return cannotWrite(path, err)
	}
	defer f.Cleanup()
	interrupts := notifyOfEnd()
	defer signal.Stop(interrupts)
	done := make(chan error, 1)
	go func() { done <- write(f) }()
	select {
	case err := <-done:
		if err == nil {
			err = f.CloseAtomicallyReplace()
		}
		if err != nil {
			return cannotWrite(path, err)
		}
		return nil
	case s := <-interrupts:
		code := exitFailure
		if number, ok := s.(syscall.Signal); ok {
			code = 128 + int(number) // as a shell says it
		}
		return &exitError{code, &interruption{path, s}}
	}
}

// interruption is the error of a signal that came while a file was written.
type interruption struct {
	path   string
	signal os.Signal
}

func (i *interruption) Error() string { return fmt.Sprintf("%s is not written: %v", i.path, i.signal) }

// notifyOfEnd catches the signals that end the program, save those that it was
// started to ignore, as by nohup.
func notifyOfEnd() chan os.Signal {
	c := make(chan os.Signal, 1)
	for _, s := range []os.Signal{os.Interrupt, syscall.SIGTERM, syscall.SIGHUP} {
		if !signal.Ignored(s) {
			signal.Notify(c, s)
		}
	}
	return c
}

// followed returns where the links of a path lead, whether there is a file or
// not.
func followed(path string) string {
	const most = 40 // as Linux follows
	for range most {
		to, err := os.Readlink(path)
		if err != nil {
			break
		}
		if !filepath.IsAbs(to) {
			to = filepath.Join(filepath.Dir(path), to)
		}
		path = to
	}
	return path
}

func cannotWrite(path string, err error) error {
	return &exitError{exitUsage, fmt.Errorf("cannot write %s: %w", path, cause(err))}
}

// cause strips the name of the temporary file from an error.
func cause(err error) error {
	var path *os.PathError
	var link *os.LinkError
	switch {
	case errors.As(err, &path):
		return path.Err
	case errors.As(err, &link):
		return link.Err
	}
	return err
}

// distinct refuses an output that is one of the inputs, those in folders too,
// or another output; and, before any work is done, one whose folder does not
// exist.
func distinct(outputs map[string]string, inputs []string) error {
	type known struct {
		place
		flag string
	}
	var taken []known
	for _, flag := range sortedKeys(outputs) {
		path := outputs[flag]
		if path == "-" || path == "" {
			continue // standard output
		}
		at := placeOf(path)
		other := ""
		if at.isAmong(inputs) {
			other = "an input"
		} else if i := slices.IndexFunc(taken, func(k known) bool { return k.is(at) }); i >= 0 {
			other = "the file of " + taken[i].flag
		}
		if other != "" {
			return usagef("%s: expected a file of its own, found %q, which is also %s", flag, path, other)
		}
		taken = append(taken, known{at, flag})
		folder := filepath.Dir(followed(path))
		if info, err := os.Stat(folder); err != nil {
			return usagef("%s: cannot write %s: %w", flag, path, cause(err))
		} else if !info.IsDir() {
			return usagef("%s: cannot write %s: %s is not a folder", flag, path, folder)
		}
		if at.info != nil && at.info.IsDir() {
			return usagef("%s: expected the name of a file, found the folder %q", flag, path)
		}
	}
	return nil
}

// place is where a path leads.
type place struct {
	id   string      // see identity
	info os.FileInfo // nil if there is nothing yet
}

func placeOf(path string) place {
	id := identity(path)
	info, _ := os.Stat(id)
	return place{id, info}
}

func (p place) isFile() bool { return p.info != nil && p.info.Mode().IsRegular() }

// is tells whether two places are one, by whatever names: there are hard links,
// and systems that don't tell letters' case.
func (p place) is(other place) bool {
	return p.id == other.id || p.isFile() && other.isFile() && os.SameFile(p.info, other.info)
}

// isAmong tells whether a place is one of the inputs. Of thousands of them no
// more is asked than it takes: a place where nothing is yet can be no file that
// exists, as those in a folder do.
func (p place) isAmong(inputs []string) bool {
	if !p.isFile() {
		return slices.ContainsFunc(inputs, func(in string) bool {
			if _, err := os.Stat(in); err == nil && p.info == nil {
				return false
			}
			return identity(in) == p.id
		})
	}
	return slices.ContainsFunc(filesOf(inputs), func(in string) bool {
		info, err := os.Stat(in)
		return err == nil && os.SameFile(info, p.info)
	})
}

// filesOf returns the files that inputs stand for.
func filesOf(inputs []string) []string {
	found, err := ingest.Find(inputs)
	if err != nil {
		return nil // it is told when the inputs are read
	}
	var files []string
	for _, in := range found {
		files = append(files, in.Path)
		// The magnitude and the phase of one sweep are two files.
		if one, other, ok := strings.Cut(in.Path, "+"); ok {
			files = append(files, one, other)
		}
	}
	return files
}

// identity returns a name that is the same for all ways to write a path.
func identity(path string) string {
	path = followed(path)
	if real, err := filepath.EvalSymlinks(path); err == nil {
		path = real
	} else if real, err := filepath.EvalSymlinks(filepath.Dir(path)); err == nil {
		path = filepath.Join(real, filepath.Base(path)) // not there yet
	}
	if abs, err := filepath.Abs(path); err == nil {
		return abs
	}
	return path
}
