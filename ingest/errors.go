package ingest

import (
	"errors"
	"fmt"
	"strings"
)

// Causes that a command tells apart with errors.Is.
var (
	// ErrConnection: S-parameters of two ports without the way the part was
	// connected. It is wrong use, not a bad file.
	ErrConnection = errors.New("connection not given")
	// ErrAmbiguous: the file can be read in two ways; the hint gives the flag.
	ErrAmbiguous = errors.New("ambiguous reading")
	// ErrTooLarge: the input is larger than Options.MaxBytes.
	ErrTooLarge = errors.New("input too large")
	// ErrUsage: a flag does not fit the file, such as a column it has not.
	ErrUsage = errors.New("flag does not fit")
)

// Error is the first fault of an input. Line and Column count from 1 and are 0
// where they mean nothing; in a spreadsheet they are row and column. Its text
// is one line:
//
//	file:line:column: expected X, found "Y"; try Z (and N more)
type Error struct {
	File         string
	Line, Column int
	Found        string // what is there
	Expected     string // what should be there
	Hint         string // what to try
	More         int    // further faults in the same input
	Err          error  // cause for errors.Is, may be nil
	// Reading is how the file was understood as far as that went, with all
	// faults; nil if nothing was.
	Reading *Reading

	bare bool // Found is a description, not a quotation
}

func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d", e.Line)
		if e.Column > 0 {
			fmt.Fprintf(&b, ":%d", e.Column)
		}
	}
	if b.Len() > 0 {
		b.WriteString(": ")
	}
	b.WriteString(e.Text())
	return b.String()
}

// Text is the message without the place.
func (e *Error) Text() string {
	var b strings.Builder
	fmt.Fprintf(&b, "expected %s, found ", e.Expected)
	if e.bare || e.Err != nil && e.Line == 0 {
		b.WriteString(e.Found)
	} else {
		fmt.Fprintf(&b, "%q", shorten(e.Found))
	}
	if e.Hint != "" {
		b.WriteString("; try: " + e.Hint)
	}
	if e.More > 0 {
		fmt.Fprintf(&b, " (and %d more)", e.More)
	}
	return oneLine(b.String())
}

// Unwrap returns the cause.
func (e *Error) Unwrap() error { return e.Err }

// shorten keeps a quotation readable.
func shorten(s string) string {
	const most = 40
	n := 0
	for i := range s {
		if n == most {
			return s[:i] + "…"
		}
		n++
	}
	return s
}

func oneLine(s string) string {
	if !strings.ContainsAny(s, "\n\r") {
		return s
	}
	return strings.Join(strings.FieldsFunc(s, func(r rune) bool { return r == '\n' || r == '\r' }), " ")
}
