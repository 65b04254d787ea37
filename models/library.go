package models

import "slices"

// Kind is the kind of part that a circuit describes.
type Kind string

// The kinds. Any marks the two textbook circuits that describe no part in
// particular and are used only when asked for by name.
const (
	CapacitorPart Kind = "capacitor"
	InductorPart  Kind = "inductor"
	BeadPart      Kind = "bead"
	ResistorPart  Kind = "resistor"
	ResonatorPart Kind = "resonator"
	AnyPart       Kind = "any"
)

// Kinds returns the kinds of part in the order of the library.
func Kinds() []Kind {
	return []Kind{CapacitorPart, InductorPart, BeadPart, ResistorPart, ResonatorPart}
}

// Model is a named circuit of the library.
type Model struct {
	Name string
	Kind Kind
	// Describes says what part the circuit is for and what its elements
	// stand for.
	Describes string
	Circuit   *Circuit
}

var library = []Model{
	model(CapacitorPart, "cap-ideal", "C",
		"A capacitor of which nothing but the capacitance shows in the sweep."),
	model(CapacitorPart, "cap-esr", "ESR + C",
		"A capacitor below its self-resonance with one loss resistance, the same at every frequency: plates, leads and electrolyte."),
	model(CapacitorPart, "cap-esr-esl", "ESR + ESL + C",
		"A capacitor through its self-resonance: loss resistance ESR and the inductance ESL of leads and winding. Ceramic and film capacitors of low loss."),
	model(CapacitorPart, "cap-leak", "ESR + ESL + (C || Rp)",
		"A capacitor whose insulation resistance Rp shows at the low end of the sweep."),
	model(CapacitorPart, "cap-loss", "ESR + ESL + loss(C, tand)",
		"A capacitor whose dielectric has the same loss tangent at every frequency; its ESR falls as 1/f towards the metallic ESR. Film and class 2 ceramic capacitors. C is the series capacitance at 1 kHz."),
	model(CapacitorPart, "cap-two-branch", "ESR + ESL + C + (R1 || C1)",
		"A wet electrolytic capacitor: the oxide's capacitance C, and a relaxation R1 with C1 of the electrolyte in the etched foil, which makes the ESR fall from its low-frequency value."),
	model(CapacitorPart, "cap-line", "ESR + ESL + rcline(R, C)",
		"A capacitor with porous or long electrodes, charged through a distributed resistance R: tantalum and polymer anodes, double-layer capacitors, wide foils."),
	model(InductorPart, "ind-ideal", "L",
		"An inductor of which nothing but the inductance shows in the sweep."),
	model(InductorPart, "ind-dcr", "DCR + L",
		"An inductor well below its self-resonance, with the resistance of its winding."),
	model(InductorPart, "ind-cp", "(DCR + L) || Cp",
		"An inductor through its self-resonance with the capacitance Cp of its winding; the loss at resonance is that of the winding resistance alone. Air-core coils."),
	model(InductorPart, "ind-core", "DCR + (L || Rp || Cp)",
		"An inductor with core loss, which limits the impedance at resonance to about Rp."),
	model(InductorPart, "ind-skin", "(DCR + skin(K) + L) || Cp",
		"An inductor whose winding resistance rises as the square root of frequency by skin effect."),
	model(InductorPart, "ind-eddy", "(DCR + L + (R1 || L1)) || Cp",
		"An inductor whose resistance rises and whose inductance falls from L + L1 to L as eddy currents in core or winding screen part of the flux."),
	model(BeadPart, "bead", "DCR + (L || R || C)",
		"A ferrite bead: inductive below, resistive with R around, and capacitive above its resonance."),
	model(BeadPart, "bead-two", "DCR + (L1 || R1 || C1) + (L2 || R2 || C2)",
		"A ferrite bead whose broad resistive range needs two sections."),
	model(ResistorPart, "res-ideal", "R",
		"A resistor of which nothing but the resistance shows in the sweep."),
	model(ResistorPart, "res-series-l", "R + L",
		"A resistor of low value with the inductance of its leads or winding."),
	model(ResistorPart, "res-shunt-c", "R || C",
		"A resistor of high value with the capacitance across it."),
	model(ResistorPart, "res-full", "(R + L) || C",
		"A resistor with both its series inductance and the capacitance across it."),
	model(ResonatorPart, "res-bvd", "C0 || (R1 + L1 + C1)",
		"A quartz crystal or ceramic resonator: the motional branch R1, L1, C1 across the static capacitance C0."),
	model(AnyPart, "series-rlc", "R + L + C",
		"A series resonant circuit, for those who ask for it by name."),
	model(AnyPart, "parallel-rlc", "R || L || C",
		"A parallel resonant circuit, for those who ask for it by name."),
}

func model(kind Kind, name, expression, describes string) Model {
	c, err := Parse(expression)
	if err != nil {
		panic("models: library circuit " + name + ": " + err.Error())
	}
	return Model{Name: name, Kind: kind, Describes: describes, Circuit: c}
}

// Library returns all named circuits, those of a kind together and within a
// kind from the simplest on.
func Library() []Model { return slices.Clone(library) }

// OfKind returns the circuits of a kind, from the simplest on.
func OfKind(kind Kind) []Model {
	var of []Model
	for _, m := range library {
		if m.Kind == kind {
			of = append(of, m)
		}
	}
	return of
}

// Lookup finds a circuit of the library by its name.
func Lookup(name string) (Model, bool) {
	for _, m := range library {
		if m.Name == name {
			return m, true
		}
	}
	return Model{}, false
}
