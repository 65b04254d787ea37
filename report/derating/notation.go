package derating

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"realpart/models/quantity"
)

// shapes are the waveforms of the notation.
var shapes = []string{"triangle", "rectangle", "trapezoid"}

// IsRipple tells whether a text is a ripple current in the notation of
// [ParseRipple], right or wrong, and not the name of a file.
func IsRipple(text string) bool {
	kind, _, ok := strings.Cut(text, ":")
	if ok && slices.Contains(shapes, strings.ToLower(strings.TrimSpace(kind))) {
		return true
	}
	first, _, ok := strings.Cut(text, "=")
	if !ok {
		return false
	}
	_, err := quantity.Parse(first, "Hz")
	return err == nil
}

// ParseRipple reads a ripple current: RMS currents at frequencies, or a
// waveform with the frequency at which it repeats.
//
//	100kHz=3.2A,200kHz=0.9A                                  RMS values
//	triangle:2.4App@180kHz                                   peak to peak
//	triangle:2.4App,duty=0.3@180kHz                          rising for 0.3 of the period
//	rectangle:3A,duty=0.3@100kHz                             height of the step
//	trapezoid:3A,duty=0.3,rise=80ns,fall=0.02@100kHz         duty between the middles of the edges
//
// A share is a number or a percentage. Edges are times or shares of the
// period; without fall they are alike. mean=5A adds direct current, which heats
// an inductor.
func ParseRipple(text string) (*Spectrum, error) {
	kind, rest, ok := strings.Cut(text, ":")
	kind = strings.ToLower(strings.TrimSpace(kind))
	if ok && slices.Contains(shapes, kind) {
		return parseWaveform(kind, rest)
	}
	var lines []Line
	for _, part := range strings.Split(text, ",") {
		f, i, ok := strings.Cut(part, "=")
		if !ok {
			return nil, fmt.Errorf("expected FREQUENCY=CURRENT, found %q; write 100kHz=3.2A,200kHz=0.9A, triangle:2.4App@180kHz, rectangle:3A,duty=0.3@100kHz, trapezoid:3A,duty=0.3,rise=80ns@100kHz, or the name of a CSV file", strings.TrimSpace(part))
		}
		freq, err := quantity.Parse(f, "Hz")
		if err != nil {
			return nil, err
		}
		rms, err := quantity.Parse(strings.TrimSuffix(strings.TrimSpace(i), "rms"), "A")
		if err != nil {
			return nil, err
		}
		lines = append(lines, Line{freq, rms})
	}
	return NewLines(lines)
}

func parseWaveform(kind, text string) (*Spectrum, error) {
	shape, at, ok := cutLast(text, "@")
	if !ok {
		return nil, fmt.Errorf("%s: expected @ and the frequency, found %q; write %s", kind, text, example(kind))
	}
	fundamental, err := quantity.Parse(at, "Hz")
	if err != nil {
		return nil, fmt.Errorf("%s: %w", kind, err)
	}
	if !(fundamental > 0) {
		return nil, fmt.Errorf("%s: expected a positive frequency, found %q", kind, at)
	}
	parts := strings.Split(shape, ",")
	w := Trapezoid{}
	if w.Height, err = height(kind, strings.TrimSpace(parts[0])); err != nil {
		return nil, err
	}
	given := map[string]float64{}
	for _, part := range parts[1:] {
		key, value, _ := strings.Cut(part, "=")
		key, value = strings.ToLower(strings.TrimSpace(key)), strings.TrimSpace(value)
		if !slices.Contains(keys(kind), key) {
			return nil, fmt.Errorf("%s: expected %s, found %q; write %s", kind, strings.Join(keys(kind), ", "), strings.TrimSpace(part), example(kind))
		}
		if _, twice := given[key]; twice {
			return nil, fmt.Errorf("%s: expected %s once, found it again", kind, key)
		}
		switch key {
		case "mean":
			given[key], err = quantity.Parse(value, "A")
		case "duty":
			given[key], err = quantity.ParsePercent(value)
		default:
			given[key], err = edge(value, fundamental)
		}
		if err != nil {
			return nil, fmt.Errorf("%s: %s: %w", kind, key, err)
		}
	}
	duty, hasDuty := given["duty"]
	switch kind {
	case "triangle":
		w.Rise, w.Width = 0.5, 0.5
		if hasDuty {
			if !(duty > 0 && duty < 1) {
				return nil, fmt.Errorf("triangle: expected a duty above 0 and below 1, found %v", duty)
			}
			w.Rise = duty
		}
		w.Fall = 1 - w.Rise
	default:
		if !hasDuty {
			return nil, fmt.Errorf("%s: expected duty=, found none; write %s", kind, example(kind))
		}
		w.Width = duty
		if kind == "trapezoid" {
			rise, ok := given["rise"]
			if !ok {
				return nil, fmt.Errorf("trapezoid: expected rise=, found none; write %s", example(kind))
			}
			w.Rise, w.Fall = rise, rise
			if fall, ok := given["fall"]; ok {
				w.Fall = fall
			}
		}
	}
	s, err := NewWaveform(kind, w, fundamental)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", kind, err)
	}
	s.Mean = given["mean"]
	return s, nil
}

func keys(kind string) []string {
	switch kind {
	case "trapezoid":
		return []string{"duty", "rise", "fall", "mean"}
	}
	return []string{"duty", "mean"}
}

func example(kind string) string {
	switch kind {
	case "triangle":
		return "triangle:2.4App@180kHz"
	case "rectangle":
		return "rectangle:3A,duty=0.3@100kHz"
	}
	return "trapezoid:3A,duty=0.3,rise=80ns@100kHz"
}

// height reads the current of a waveform. That of a triangle must say that it
// is peak to peak, since data sheets and textbooks also give its peak.
func height(kind, text string) (float64, error) {
	number, peakToPeak := strings.CutSuffix(text, "pp")
	v, err := quantity.Parse(number, "A")
	if err != nil {
		return 0, fmt.Errorf("%s: %w", kind, err)
	}
	if kind == "triangle" && !peakToPeak {
		return 0, errors.New("triangle: expected a current peak to peak, found " + fmt.Sprintf("%q", text) + "; write " + example(kind))
	}
	return v, nil
}

// edge reads a time or a share of the period.
func edge(text string, fundamental float64) (float64, error) {
	if v, err := quantity.ParsePercent(text); err == nil {
		if v >= 1 {
			return 0, fmt.Errorf("expected a time with its unit or a share of the period below 1, found %q", text)
		}
		return v, nil
	}
	v, err := quantity.Parse(text, "s")
	return v * fundamental, err
}

// cutLast is strings.Cut at the last separator.
func cutLast(s, separator string) (before, after string, found bool) {
	if i := strings.LastIndex(s, separator); i >= 0 {
		return s[:i], s[i+len(separator):], true
	}
	return s, "", false
}
