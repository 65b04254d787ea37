//go:build unix

package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"syscall"
	"testing"
	"time"
)

// An output that fails halfway leaves the file as it was, and nothing beside it.
func TestWriteFileWhole(t *testing.T) {
	for name, write := range map[string]func(io.Writer) error{
		"error": func(w io.Writer) error {
			io.WriteString(w, "half")
			return errors.New("no more")
		},
		// Longer than the test waits: the signal has to end it.
		"signal": func(w io.Writer) error {
			io.WriteString(w, "half")
			if err := syscall.Kill(os.Getpid(), syscall.SIGTERM); err != nil {
				return err
			}
			time.Sleep(time.Minute)
			return nil
		},
	} {
		t.Run(name, func(t *testing.T) {
			folder := t.TempDir()
			path := filepath.Join(folder, "page.html")
			if err := os.WriteFile(path, []byte("old"), 0o640); err != nil {
				t.Fatal(err)
			}
			err := writeFile(path, write)
			if err == nil {
				t.Fatal("no error")
			}
			if name == "signal" {
				if want := "exit 143: " + path + " is not written: terminated"; fmt.Sprintf("exit %d: %v", exitCode(err), err) != want {
					t.Errorf("exit %d: %v, want %s", exitCode(err), err, want)
				}
			}
			if text, err := os.ReadFile(path); err != nil || string(text) != "old" {
				t.Errorf("the file holds %q, %v", text, err)
			}
			entries, err := os.ReadDir(folder)
			if err != nil || len(entries) != 1 {
				t.Errorf("%d files, want 1; %v", len(entries), err)
			}
		})
	}
}

// The permissions of a file that is replaced stay.
func TestWriteFilePermissions(t *testing.T) {
	path := filepath.Join(t.TempDir(), "page.html")
	if err := os.WriteFile(path, []byte("old"), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := writeFile(path, func(w io.Writer) error { _, err := io.WriteString(w, "new"); return err }); err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(path)
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("permissions %v, want -rw-------; %v", info.Mode(), err)
	}
}
