package fit

import (
	"realpart/models"
)

// Warning is something that does not stop an analysis but that its reader
// must know. Code is stable, for programs; Text says what was seen and what
// to do.
type Warning struct {
	Code, Text string
}

// Candidate is one circuit that was tried on a sweep.
type Candidate struct {
	// Name is that of the library; "" for a user's own expression.
	Name    string
	Circuit *models.Circuit
	Result  *Result // nil if the fit was not possible
	// AICc is Akaike's information criterion with the correction for small
	// samples; smaller is better.
	AICc float64
	// Chosen marks the one candidate that the analysis goes on with; Reason
	// says why, or why not.
	Chosen bool
	Reason string
}

// Analysis is what is said of one sweep: the kind of part, the circuit
// chosen, its fit, and the candidates that were not chosen.
type Analysis struct {
	Kind       models.Kind
	Name       string // of the circuit in the library; "" for a user's own
	Result     *Result
	Candidates []Candidate
	Warnings   []Warning
}
