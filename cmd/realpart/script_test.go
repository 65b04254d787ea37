package main

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"realpart": main})
}

// Whole commands as a user types them: exit codes, both streams, files.
func TestScript(t *testing.T) {
	root, err := filepath.Abs("../..")
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir:           "testdata/script",
		UpdateScripts: os.Getenv("UPDATE_SCRIPTS") != "",
		Setup: func(e *testscript.Env) error {
			e.Setenv("DEMO", filepath.Join(root, "testdata", "demo"))
			e.Setenv("OPEN_SWEEPS", filepath.Join(root, "testdata", "open-sweeps"))
			return nil
		},
	})
}
