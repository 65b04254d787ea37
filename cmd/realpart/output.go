package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/google/renameio/v2"
)

// writeFile writes an output whole or not at all: to a temporary file beside
// it, which takes its place when everything is written.
func writeFile(path string, write func(io.Writer) error) error {
	if real, err := filepath.EvalSymlinks(path); err == nil {
		path = real // a link stays a link
	}
	if info, err := os.Stat(path); err == nil && !info.Mode().IsRegular() {
		// A pipe or device can't be replaced; /dev/stdout is a common wish.
		f, err := os.OpenFile(path, os.O_WRONLY, 0)
		if err != nil {
			return &exitError{exitUsage, err}
		}
		if err := write(f); err != nil {
			f.Close()
			return err
		}
		return f.Close()
	}
	f, err := renameio.NewPendingFile(path, renameio.WithPermissions(0o644), renameio.WithExistingPermissions())
	if err != nil {
		return &exitError{exitUsage, fmt.Errorf("cannot write %s: %w", path, cause(err))}
	}
	defer f.Cleanup()
	if err := write(f); err != nil {
		return fmt.Errorf("cannot write %s: %w", path, cause(err))
	}
	if err := f.CloseAtomicallyReplace(); err != nil {
		return fmt.Errorf("cannot write %s: %w", path, cause(err))
	}
	return nil
}

// cause strips the name of the temporary file from an error.
func cause(err error) error {
	if e, ok := err.(*os.PathError); ok {
		return e.Err
	}
	return err
}

// distinct refuses an output that is one of the inputs or another output.
func distinct(outputs map[string]string, inputs []string) error {
	seen := map[string]string{}
	for _, in := range inputs {
		seen[identity(in)] = "an input"
	}
	for _, flag := range sortedKeys(outputs) {
		id := identity(outputs[flag])
		if what, ok := seen[id]; ok {
			return usagef("%s: expected a file of its own, found %q, which is also %s", flag, outputs[flag], what)
		}
		seen[id] = "the file of " + flag
	}
	return nil
}

// identity returns a name that is the same for all ways to write a path.
func identity(path string) string {
	if real, err := filepath.EvalSymlinks(path); err == nil {
		path = real
	}
	if abs, err := filepath.Abs(path); err == nil {
		return abs
	}
	return path
}
