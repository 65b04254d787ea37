package derating

import "realpart/models"

// cautions are those of every output.
func cautions(kind models.Kind, life bool) []string {
	c := []string{
		"Stored charge: discharge a capacitor, and wait for dielectric absorption, before touching or measuring it.",
		"A small-signal sweep at one bias and one temperature is not the part in service: resistance changes with temperature, signal level, bias and age.",
		"Class 2 ceramics lose capacitance under direct voltage, and by age: measure at the voltage in service.",
	}
	if inductive(kind) {
		c = append(c,
			"Saturation is out of scope: nothing here says what current an inductor or bead takes before its inductance falls and its loss rises.",
			"The resistance of a small-signal sweep holds copper loss and little of the core's hysteresis loss, which grows faster than the square of the current. The core's data sheet gives it.")
	}
	if life {
		c = append(c, "The life rule is common practice for wet aluminium electrolytics alone, no source, and no promise. It is not judged here.")
	}
	return append(c,
		"The manufacturer's data sheet, the derating standard in force, local codes and a qualified engineer decide. This is an aid to them, not an approval.")
}
