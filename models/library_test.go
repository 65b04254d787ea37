package models

import (
	"slices"
	"strings"
	"testing"
)

// Names, kinds and expressions are what users and files refer to: they may be
// added to, but not change.
func TestLibrary(t *testing.T) {
	want := []struct {
		kind             Kind
		name, expression string
	}{
		{"capacitor", "cap-ideal", "C"},
		{"capacitor", "cap-esr", "ESR + C"},
		{"capacitor", "cap-esr-esl", "ESR + ESL + C"},
		{"capacitor", "cap-leak", "ESR + ESL + (C || Rp)"},
		{"capacitor", "cap-loss", "ESR + ESL + loss(C, tand)"},
		{"capacitor", "cap-two-branch", "ESR + ESL + C + (R1 || C1)"},
		{"capacitor", "cap-line", "ESR + ESL + rcline(R, C)"},
		{"inductor", "ind-ideal", "L"},
		{"inductor", "ind-dcr", "DCR + L"},
		{"inductor", "ind-cp", "(DCR + L) || Cp"},
		{"inductor", "ind-core", "DCR + (L || Rp || Cp)"},
		{"inductor", "ind-skin", "(DCR + skin(K) + L) || Cp"},
		{"inductor", "ind-eddy", "(DCR + L + (R1 || L1)) || Cp"},
		{"bead", "bead", "DCR + (L || R || C)"},
		{"bead", "bead-two", "DCR + (L1 || R1 || C1) + (L2 || R2 || C2)"},
		{"resistor", "res-ideal", "R"},
		{"resistor", "res-series-l", "R + L"},
		{"resistor", "res-shunt-c", "R || C"},
		{"resistor", "res-full", "(R + L) || C"},
		{"resonator", "res-bvd", "C0 || (R1 + L1 + C1)"},
		{"any", "series-rlc", "R + L + C"},
		{"any", "parallel-rlc", "R || L || C"},
	}
	got := Library()
	if len(got) != len(want) {
		t.Fatalf("%d circuits, want %d", len(got), len(want))
	}
	for i, w := range want {
		m := got[i]
		if m.Kind != w.kind || m.Name != w.name || m.Circuit.String() != w.expression {
			t.Errorf("circuit %d: %s %s %s, want %s %s %s", i, m.Kind, m.Name, m.Circuit, w.kind, w.name, w.expression)
		}
		if !strings.HasSuffix(m.Describes, ".") {
			t.Errorf("%s: description %q is no sentence", m.Name, m.Describes)
		}
		found, ok := Lookup(w.name)
		if !ok || found.Circuit != m.Circuit {
			t.Errorf("Lookup(%q) = %v, %v", w.name, found, ok)
		}
	}
	if m, ok := Lookup("Cap-Ideal"); ok {
		t.Errorf("Lookup(Cap-Ideal) finds %s", m.Name)
	}
}

func TestKinds(t *testing.T) {
	want := []Kind{"capacitor", "inductor", "bead", "resistor", "resonator"}
	if got := Kinds(); !slices.Equal(got, want) {
		t.Errorf("Kinds() = %v, want %v", got, want)
	}
	// The library is the kinds one after the other, the textbook circuits last.
	var names []string
	for _, kind := range append(Kinds(), AnyPart) {
		of := OfKind(kind)
		if len(of) == 0 {
			t.Errorf("no circuit for %s", kind)
		}
		for _, m := range of {
			names = append(names, m.Name)
		}
	}
	for i, m := range Library() {
		if names[i] != m.Name {
			t.Errorf("circuit %d of the kinds is %s, of the library %s", i, names[i], m.Name)
		}
	}
	if of := OfKind("valve"); of != nil {
		t.Errorf("circuits for an unknown kind: %v", of)
	}
}

func TestLibraryIsACopy(t *testing.T) {
	Library()[0].Name = "changed"
	if Library()[0].Name != "cap-ideal" {
		t.Error("a caller can change the library")
	}
}
