package derating

import (
	"math"
	"slices"
	"strings"
	"testing"

	"realpart/fit"
	"realpart/models"
	"realpart/report"
)

// A plain number may be in K, whose unit a record does not keep.
func TestTemperatureOf(t *testing.T) {
	for text, want := range map[string]float64{
		"23.5 °C": 23.5, "85": 85, "-40": -40, "358.15 K": 85, "358.15": math.NaN(), "": math.NaN(), "room": math.NaN(), "250 °C": 250,
	} {
		got := temperatureOf(text)
		if !(math.Abs(got-want) <= 1e-9*math.Abs(want)) && !(math.IsNaN(got) && math.IsNaN(want)) {
			t.Errorf("%q is %v °C, want %v", text, got, want)
		}
	}
}

// What a record lacks is told: of every one that it has no points, the rest
// where it matters.
func TestFromRecordWarnings(t *testing.T) {
	accuracy := func(_, _ float64) (magnitude, phase float64, ok bool) { return 0.001, 0.001, true }
	for _, c := range []struct {
		circuit  string
		settings fit.Settings
		want     []string
	}{
		{"ESR + ESL + C", fit.Settings{}, []string{"from-record"}},
		{"ESR + ESL + C", fit.Settings{Accuracy: accuracy}, []string{"from-record", "record-meter"}},
		{"R1 + R2 + ESL + C", fit.Settings{}, []string{"from-record", "record-undetermined"}}, // R1 from R2
	} {
		circuit, err := models.Parse(c.circuit)
		if err != nil {
			t.Fatal(err)
		}
		part := sweepOf(t, "ESR + ESL + C", []float64{20e-3, 10e-9, 10e-6}, 0.001, 3, nil)
		r, err := fit.Fit(part.Fit.Freq, part.Fit.Measured, circuit, &c.settings)
		if err != nil {
			t.Fatal(err)
		}
		n := len(r.Freq)
		record := report.New(report.Sweep{File: "part.csv", Part: "part", UsedPoints: n, FMin: r.Freq[0], FMax: r.Freq[n-1]},
			&fit.Analysis{Kind: models.CapacitorPart, Result: r}, report.Options{})
		got, err := FromRecord(record)
		if err != nil {
			t.Fatal(err)
		}
		var codes []string
		for _, w := range got.Warnings {
			codes = append(codes, w.Code)
		}
		if !slices.Equal(codes, c.want) {
			t.Errorf("%s: warnings %v, want %v", c.circuit, codes, c.want)
		}
		if len(c.want) == 2 && c.settings.Accuracy == nil && !strings.Contains(got.Warnings[1].Text, "R1") {
			t.Errorf("%s: %s", c.circuit, got.Warnings[1].Text)
		}
	}
}
