package derating

import (
	"fmt"
	"math"
	"strings"

	"realpart/fit"
	"realpart/models"
	"realpart/models/quantity"
	"realpart/report"
)

// FromRecord makes a sweep of a record that converged. What the record lacks
// is told in the sweep's warnings. The error says what the record has wrong.
func FromRecord(f *report.Fit) (Sweep, error) {
	s := Sweep{
		File: f.Sweep.File, Part: f.Sweep.Part, SHA256: f.Sweep.SHA256, Kind: f.Kind,
		Temperature: temperatureOf(f.Sweep.Metadata["temperature"]),
	}
	circuit, err := models.Parse(f.Circuit.Expression)
	if err != nil {
		return s, fmt.Errorf("circuit: %w", err)
	}
	number := func(v *float64) float64 {
		if v == nil {
			return math.NaN()
		}
		return *v
	}
	var parameters []fit.Parameter
	for _, p := range f.Parameters {
		parameters = append(parameters, fit.Parameter{
			Parameter: models.Parameter{Name: p.Name}, Value: p.Value, Fixed: p.Fixed, Determined: p.Determined,
			StdError: number(p.StdError), MeterError: number(p.MeterError), Low95: number(p.Low95), High95: number(p.High95),
		})
	}
	if s.Fit, err = fit.Restore(circuit, parameters, f.Correlation, f.Sweep.UsedPoints, f.Sweep.FMin, f.Sweep.FMax); err != nil {
		return s, err
	}
	s.Fit.Structured, s.Fit.RMSRelative = f.Residuals.Structured, f.Residuals.RMSRelative
	for _, w := range f.Warnings {
		s.Warnings = append(s.Warnings, Warning(w))
	}
	s.Warnings = append(s.Warnings, lacking(s.Fit)...)
	return s, nil
}

// lacking says what a restored fit cannot tell.
func lacking(r *fit.Result) []Warning {
	warnings := []Warning{{"from-record", "The fit is taken from a record, which does not hold the points: fitted and measured ESR are not compared, nor is the ESR with the meter's resolution. The sweep itself gives both."}}
	var open []string
	for _, i := range r.Free {
		if !r.Parameters[i].Determined {
			open = append(open, r.Parameters[i].Name)
		}
	}
	if open != nil {
		warnings = append(warnings, Warning{"record-undetermined", fmt.Sprintf("The sweep does not determine %s, and the record does not hold which other circuits that leaves: the intervals of ESR and loss may be too narrow. The sweep itself tells more.", strings.Join(open, ", "))})
	}
	if r.MeterCovariance != nil {
		warnings = append(warnings, Warning{"record-meter", "The record does not say how the meter's errors of the values go together: its part of the intervals is taken so large that it is enough in any case. From the sweep itself they are narrower as a rule."})
	}
	return warnings
}

// temperatureOf is a temperature in °C from what a sweep states; NaN where it
// is not known. A plain number is one in °C, unless it may as well be in K,
// whose unit the sweep had in another cell.
func temperatureOf(text string) float64 {
	const plausible = 200
	if t, err := quantity.Parse(text, "°C"); err == nil {
		if plain, err := quantity.Parse(text, "1"); err == nil && plain >= plausible {
			return math.NaN()
		}
		return t
	}
	if t, err := quantity.Parse(text, "K"); err == nil {
		return t - kelvin
	}
	return math.NaN()
}
