package main

import (
	"errors"
	"fmt"
	"runtime/debug"
	"strings"

	"github.com/spf13/cobra"

	"realpart/fit"
	"realpart/ingest"
	"realpart/models"
)

// version is set by the linker; otherwise the module's build information
// tells.
var version string

// The exit codes.
const (
	exitNo      = 1 // done, and the answer is no
	exitUsage   = 2 // wrong use
	exitFailure = 3 // an input could not be read or fitted
)

// exitError carries an exit code. A nil err has been told already.
type exitError struct {
	code int
	err  error
}

func (e *exitError) Error() string {
	if e.err == nil {
		return fmt.Sprintf("exit %d", e.code)
	}
	return e.err.Error()
}

func (e *exitError) Unwrap() error { return e.err }

// usagef returns an error of wrong use.
func usagef(format string, args ...any) error {
	return &exitError{exitUsage, fmt.Errorf(format, args...)}
}

// run executes a command line and returns the exit code. It is all of the
// program but the process, so that tests can run it.
func run(args []string, s streams) int {
	s.command = commandLine(args)
	root := newRoot(s)
	root.SetArgs(args)
	root.SetIn(s.in)
	root.SetOut(s.out)
	root.SetErr(s.err)
	err := root.Execute()
	if err == nil {
		return 0
	}
	code := exitCode(err)
	if exit := new(exitError); !errors.As(err, &exit) || exit.err != nil {
		fmt.Fprintln(s.err, "realpart:", oneLine(err.Error()))
	}
	return code
}

// exitCode tells wrong use from an input that could not be used.
func exitCode(err error) int {
	var exit *exitError
	var input *fit.InputError
	var flag *ingest.FlagError
	var syntax *models.SyntaxError
	switch {
	case errors.As(err, &exit):
		return exit.code
	case errors.Is(err, ingest.ErrConnection), errors.Is(err, ingest.ErrUsage),
		errors.As(err, &flag), errors.As(err, &syntax), errors.As(err, &input) && input.Flag != "":
		return exitUsage
	case errors.As(err, &input), errors.As(err, new(*ingest.Error)):
		return exitFailure
	}
	return exitUsage // what is left is cobra's: unknown commands and flags
}

// commandLine returns the command as one could type it in a POSIX shell.
func commandLine(args []string) string {
	words := []string{"realpart"}
	for _, a := range args {
		if a == "" || strings.ContainsAny(a, " \t\n'\"\\$`*?[]{}()<>|&;#~!") {
			a = "'" + strings.ReplaceAll(a, "'", `'\''`) + "'"
		}
		words = append(words, a)
	}
	return strings.Join(words, " ")
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

func newRoot(s streams) *cobra.Command {
	root := &cobra.Command{
		Use:   "realpart",
		Short: "Equivalent circuits of passive parts from impedance sweeps",
		Long: `realpart reads impedance sweeps of capacitors, inductors, beads, resistors and
resonators, whatever the meter saved, and turns them into equivalent circuits
with honest uncertainty.`,
		Version:       buildVersion(),
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return cmd.Help()
		},
	}
	root.SetVersionTemplate("realpart {{.Version}}\n")
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error {
		return &exitError{exitUsage, err}
	})
	root.AddCommand(newFit(s), newCheck(s), newCompensate(s), newAccept(s), newCompare(s), newDerate(s), newSimulate(s), newModels(s))
	return root
}

func buildVersion() string {
	if version != "" {
		return version
	}
	info, ok := debug.ReadBuildInfo()
	if !ok || info.Main.Version == "" {
		return "(unversioned build)"
	}
	return info.Main.Version
}
