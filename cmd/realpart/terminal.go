package main

import (
	"fmt"
	"io"
	"os"
	"strings"

	"golang.org/x/term"

	"realpart/report"
)

// terminalWidth returns the columns of the terminal that w is, else 80.
func terminalWidth(w io.Writer) int {
	if f, ok := w.(*os.File); ok {
		if width, _, err := term.GetSize(int(f.Fd())); err == nil && width > 0 {
			return width
		}
	}
	return 80
}

func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

// wantsColour: on a terminal, unless NO_COLOR is set to anything.
func wantsColour(w io.Writer) bool {
	return isTerminal(w) && os.Getenv("NO_COLOR") == "" && os.Getenv("TERM") != "dumb"
}

// writeCautions prints the cautions once, after all results.
func writeCautions(w io.Writer, width int) error {
	var b strings.Builder
	b.WriteString("\nCautions\n")
	for _, c := range report.Cautions() {
		b.WriteString("  " + strings.ReplaceAll(wrap(c, min(width, 100)-4), "\n", "\n  ") + "\n")
	}
	_, err := fmt.Fprint(w, b.String())
	return err
}
