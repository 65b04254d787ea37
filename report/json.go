package report

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"io"
)

// WriteJSON writes a record as one line of JSON (JSON Lines).
func WriteJSON(w io.Writer, f *Fit) error {
	line, err := AppendJSON(nil, f)
	if err != nil {
		return err
	}
	_, err = w.Write(line)
	return err
}

// longestLine bounds a line of JSON Lines, in bytes. A record takes some ten
// kilobytes.
const longestLine = 16 << 20

// ReadJSON reads the records that [WriteJSON] wrote, one a line; empty lines
// are passed over. name is that of the file, for errors. An error names file
// and line.
func ReadJSON(r io.Reader, name string) ([]*Fit, error) {
	scanner := bufio.NewScanner(r)
	scanner.Buffer(nil, longestLine)
	var fits []*Fit
	line := 0
	for scanner.Scan() {
		line++
		text := bytes.TrimSpace(scanner.Bytes())
		if len(text) == 0 {
			continue
		}
		f := new(Fit)
		if err := json.Unmarshal(text, f); err != nil {
			return nil, fmt.Errorf("%s:%d: expected a line of `realpart fit --json`: %w", name, line, err)
		}
		if f.Schema != Schema {
			return nil, fmt.Errorf("%s:%d: expected a line with \"schema\":%q, found %q; write it with `realpart fit --json`", name, line, Schema, f.Schema)
		}
		if err := f.check(); err != nil {
			return nil, fmt.Errorf("%s:%d: %w", name, line, err)
		}
		fits = append(fits, f)
	}
	if err := scanner.Err(); err != nil {
		return nil, fmt.Errorf("%s:%d: %w", name, line+1, err)
	}
	return fits, nil
}

// check finds what a record that came from outside may lack.
func (f *Fit) check() error {
	switch f.Status {
	case FitFailed:
		if f.Error == nil {
			return fmt.Errorf("expected \"error\" for a failed sweep, found none")
		}
		return nil
	case Converged, NotConverged:
		if f.Circuit == nil || f.Residuals == nil || len(f.Parameters) == 0 {
			return fmt.Errorf("expected \"circuit\", \"parameters\" and \"residuals\", found an incomplete record")
		}
		return nil
	}
	return fmt.Errorf("expected \"status\" %s, %s or %s, found %q", Converged, NotConverged, FitFailed, f.Status)
}
