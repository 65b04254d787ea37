package main

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"realpart/models"
	"realpart/models/quantity"
)

// hertz is a flag value in Hz.
type hertz float64

func (h *hertz) String() string {
	if *h == 0 {
		return ""
	}
	return quantity.Format(float64(*h), "Hz", 4)
}
func (h *hertz) Type() string { return "frequency" }
func (h *hertz) Set(text string) error {
	v, err := frequency(text)
	*h = hertz(v)
	return err
}

func frequency(text string) (float64, error) {
	v, err := quantity.Parse(text, "Hz")
	if err != nil {
		return 0, err
	}
	if !(v > 0) || math.IsInf(v, 1) {
		return 0, fmt.Errorf("expected a positive frequency, found %q", text)
	}
	return v, nil
}

// settings gives all digits.
func (h *hertz) settings() string { return fmt.Sprint(float64(*h)) }

// frequencies is a flag value: a list of frequencies.
type frequencies []float64

func (f *frequencies) String() string {
	var s []string
	for _, v := range *f {
		s = append(s, quantity.Format(v, "Hz", 4))
	}
	return strings.Join(s, ",")
}
func (f *frequencies) Type() string { return "frequencies" }
func (f *frequencies) Set(text string) error {
	for _, part := range strings.Split(text, ",") {
		v, err := frequency(strings.TrimSpace(part))
		if err != nil {
			return err
		}
		*f = append(*f, v)
	}
	return nil
}

func (f *frequencies) settings() string { return fmt.Sprint([]float64(*f)) }

// share is a flag value such as 0.1%.
type share float64

func (s *share) String() string { return strconv.FormatFloat(float64(*s)*100, 'g', -1, 64) + "%" }
func (s *share) Type() string   { return "share" }
func (s *share) Set(text string) error {
	v, err := quantity.ParsePercent(text)
	if err != nil {
		return err
	}
	if !(v >= 0 && v < 1) {
		return fmt.Errorf("expected 0 %% to below 100 %%, found %q", text)
	}
	*s = share(v)
	return nil
}

// assignments is a repeatable flag NAME=VALUE. The unit of a value depends on
// the parameter, so that texts are kept until the circuit is known.
type assignments struct {
	flag  string
	names []string
	texts map[string]string
}

func (a *assignments) String() string { return "" }
func (a *assignments) Type() string   { return "NAME=VALUE" }
func (a *assignments) Set(text string) error {
	name, value, ok := strings.Cut(text, "=")
	name, value = strings.TrimSpace(name), strings.TrimSpace(value)
	if !ok || name == "" || value == "" {
		return fmt.Errorf("expected NAME=VALUE, found %q", text)
	}
	if _, twice := a.texts[name]; twice {
		return fmt.Errorf("expected each name once, found %s again", name)
	}
	if a.texts == nil {
		a.texts = map[string]string{}
	}
	a.names = append(a.names, name)
	a.texts[name] = value
	return nil
}

func (a *assignments) settings() string {
	var s []string
	for _, name := range sortedKeys(a.texts) {
		s = append(s, name+"="+a.texts[name])
	}
	return strings.Join(s, " ")
}

// resolve reads the values with the units of the parameters: those of the
// circuit, or, where the sweep is to choose it, of any library circuit.
func (a *assignments) resolve(c *models.Circuit) (map[string]float64, error) {
	values := map[string]float64{}
	for _, name := range a.names {
		p, err := a.parameter(c, name)
		if err != nil {
			return nil, err
		}
		v, err := a.value(p, a.texts[name])
		if err != nil {
			return nil, err
		}
		values[name] = v
	}
	return values, nil
}

func (a *assignments) value(p models.Parameter, text string) (float64, error) {
	v, err := parseParameter(p, text)
	if err == nil {
		err = p.CheckValue(v)
	}
	if err != nil {
		return 0, usagef("%s %s=%s: %w", a.flag, p.Name, text, err)
	}
	return v, nil
}

// parseParameter reads the value of a parameter. The coefficients of the
// constant-phase element and of skin effect have units that nobody types.
func parseParameter(p models.Parameter, text string) (float64, error) {
	switch p.Unit {
	case "Ω", "H", "F":
		return quantity.Parse(text, p.Unit)
	}
	return quantity.Parse(text, "1")
}

func (a *assignments) parameter(c *models.Circuit, name string) (models.Parameter, error) {
	var known []string
	if c != nil {
		if i, ok := c.Index(name); ok {
			return c.Parameters()[i], nil
		}
		for _, p := range c.Parameters() {
			known = append(known, p.Name)
		}
		return models.Parameter{}, usagef("%s: expected a parameter of %s (%s), found %q%s", a.flag, c, strings.Join(known, ", "), name, didYouMean(name, known))
	}
	for _, m := range models.Library() {
		if i, ok := m.Circuit.Index(name); ok {
			return m.Circuit.Parameters()[i], nil
		}
		for _, p := range m.Circuit.Parameters() {
			if !slices.Contains(known, p.Name) {
				known = append(known, p.Name)
			}
		}
	}
	slices.Sort(known)
	return models.Parameter{}, usagef("%s: expected a parameter of a library circuit (%s), found %q", a.flag, strings.Join(known, ", "), name)
}

// complete returns the values of all parameters of a circuit in their order.
func (a *assignments) complete(c *models.Circuit) ([]float64, error) {
	named, err := a.resolve(c)
	if err != nil {
		return nil, err
	}
	values := make([]float64, len(c.Parameters()))
	var missing []string
	for i, p := range c.Parameters() {
		v, ok := named[p.Name]
		if !ok {
			missing = append(missing, p.Name)
		}
		values[i] = v
	}
	if len(missing) > 0 {
		return nil, usagef("%s: expected a value for every parameter of %s, found none for %s", a.flag, c, strings.Join(missing, ", "))
	}
	return values, nil
}

// findCircuit reads the value of --circuit: a library name or an expression;
// nil if it is empty.
func findCircuit(text string) (*models.Circuit, string, error) {
	if text == "" {
		return nil, "", nil
	}
	if m, ok := models.Lookup(text); ok {
		return m.Circuit, m.Name, nil
	}
	c, err := models.Parse(text)
	if err == nil {
		return c, "", nil
	}
	if isNameLike(text) {
		return nil, "", usagef("--circuit: expected a library name or an expression, found %q%s", text, orList(didYouMean(text, libraryNames())))
	}
	return nil, "", usagef("--circuit: %w", err)
}

// isNameLike tells whether a text is meant as a library name: a word with a
// hyphen.
func isNameLike(text string) bool {
	return strings.Contains(text, "-") && !strings.ContainsAny(text, "+|() ")
}

func orList(hint string) string {
	if hint == "" {
		return "; `realpart models` lists the names"
	}
	return hint
}

func sortedKeys[V any](m map[string]V) []string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}
