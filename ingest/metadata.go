package ingest

import (
	"strings"

	"realpart/models/quantity"
)

// Metadata is what a file says about the measurement, as found; a number beside
// it where the text is one.
type Metadata struct {
	Part, Serial, Lot string
	Date              string

	TestLevel    string
	TestLevelV   float64 // V, if HasTestLevel and the text is a voltage
	TestLevelA   float64 // A, if HasTestLevel and the text is a current
	HasTestLevel bool

	Bias    string
	BiasV   float64 // V, if HasBias and the text is a voltage
	BiasA   float64 // A, if HasBias and the text is a current
	HasBias bool

	Temperature    string
	TemperatureC   float64 // °C, if HasTemperature
	HasTemperature bool

	// mode is the pair of quantities that the instrument was set to ("Cp-D");
	// it settles what a column "C" or "L" is.
	mode string
	// reference is a stated reference resistance in Ω, 0 if none.
	reference float64
}

// set stores a value under the words before its colon, squeezed; false if they
// are not known. unit is what they say in brackets. Common practice, no source.
func (m *Metadata) set(key, value, unit string) bool {
	switch key {
	case "part", "partid", "partname", "partno", "partnumber", "dut", "dutid", "dutname", "sample", "samplename", "sampleid", "specimen",
		"device", "deviceid", "devicename", "component", "componentname", "componentid", "bauteil", "prüfling":
		m.Part = value
	case "serial", "serialno", "serialnumber", "serialnr", "sn", "s/n", "dutserial", "partserial", "seriennummer":
		m.Serial = value
	case "lot", "lotno", "lotnumber", "lotid", "batch", "batchno", "batchnumber", "batchid", "los", "charge":
		m.Lot = value
	case "date", "datetime", "dateandtime", "time", "timestamp", "testdate", "measurementdate", "dateoftest", "datum", "saved", "measured":
		if m.Date == "" {
			m.Date = value
		} else if !strings.Contains(m.Date, value) {
			m.Date += " " + value
		}
	case "testlevel", "level", "osclevel", "oscillatorlevel", "oscillation", "signallevel", "testsignallevel", "testsignal", "aclevel",
		"acvoltage", "testvoltage", "signalvoltage", "drivelevel", "amplitude", "acamplitude", "excitation", "testcurrent", "osc", "pegel",
		"messpegel":
		m.TestLevel = value
		m.TestLevelV, m.TestLevelA, m.HasTestLevel = voltsOrAmps(value, unit)
	case "bias", "dcbias", "biasvoltage", "dcbiasvoltage", "dcvoltage", "biaslevel", "dcbiaslevel", "vbias", "ubias", "biascurrent",
		"dcbiascurrent", "dccurrent", "ibias", "vdc", "idc":
		m.Bias = value
		m.BiasV, m.BiasA, m.HasBias = voltsOrAmps(value, unit)
	case "temperature", "temp", "ambient", "ambienttemperature", "temperatur", "chambertemperature", "t(°c)", "testtemperature":
		m.Temperature = value
		t, err := quantity.Parse(value, "°C")
		if err != nil {
			var k float64
			if k, err = quantity.Parse(value, "K"); err == nil {
				t = k - 273.15
			}
		}
		if err != nil {
			return true
		}
		if unit == "K" && t == scaleOnly(value) {
			t -= 273.15
		}
		m.TemperatureC, m.HasTemperature = t, true
	case "mode", "function", "measurementmode", "measurementfunction", "measfunction", "measuremode", "parameter", "parameters",
		"measurementparameter", "measurementparameters", "type", "quantity", "func", "primary", "primaryparameter":
		if m.mode == "" {
			m.mode = strings.ToLower(value)
		}
	case "z0", "zref", "referenceimpedance", "referenceresistance", "systemimpedance", "refimpedance", "impedancereference",
		"portimpedance", "portz":
		if r, err := quantity.Parse(value, "Ω"); err == nil && r > 0 {
			m.reference = r
		}
	default:
		return false
	}
	return true
}

// scaleOnly is the plain number in a text, to tell whether it had its own unit.
func scaleOnly(v string) float64 {
	f, kind := parseNumber(v, '.')
	if kind != isNumber {
		return -1e300
	}
	return f
}

// voltsOrAmps reads a level; unit is what the key said in brackets.
func voltsOrAmps(text, unit string) (v, a float64, ok bool) {
	first, _, _ := strings.Cut(text, ",")
	for _, suffix := range []string{"rms", "RMS", "pk", "DC", "dc"} {
		first = strings.TrimSpace(strings.TrimSuffix(first, suffix))
	}
	if x, kind := parseNumber(first, '.'); kind == isNumber {
		switch u, ok, _ := readUnit(unit); {
		case ok && u.dim == "A":
			return 0, scale(x, u.exp), true
		case ok && u.dim == "V":
			return scale(x, u.exp), 0, true
		}
		return 0, 0, false
	}
	if x, err := quantity.Parse(first, "V"); err == nil {
		return x, 0, true
	}
	if x, err := quantity.Parse(first, "A"); err == nil {
		return 0, x, true
	}
	return 0, 0, false
}

// read takes a line as "key: value" (or with =, a delimiter or a tab between)
// and stores it if the key is known.
func (m *Metadata) read(text string) bool {
	key, value, ok := keyValue(text)
	if !ok {
		return false
	}
	unit := ""
	if i := strings.LastIndexAny(key, "(["); i > 0 {
		unit = strings.Trim(key[i:], "()[] ")
		key = key[:i]
	}
	word, _ := squeeze(key)
	return m.set(word, value, unit)
}

// keyValue cuts a preamble line in two.
func keyValue(text string) (key, value string, ok bool) {
	text = strings.TrimSpace(strings.Trim(strings.TrimSpace(text), "#%!*"))
	i := strings.IndexAny(text, ":=;,\t")
	if i <= 0 {
		return "", "", false
	}
	key = strings.Trim(text[:i], "\" \t")
	value = strings.Trim(text[i+1:], "\" \t,;")
	if key == "" || value == "" || len(key) > 60 {
		return "", "", false
	}
	// value,unit in two cells
	for _, sep := range []string{"\t", ";", ","} {
		if v, u, ok := strings.Cut(value, sep); ok {
			v, u = strings.Trim(v, "\" "), strings.Trim(u, "\" ,;\t()[]")
			if _, isUnit, _ := readUnit(u); isUnit {
				value = v + " " + u
			}
			break
		}
	}
	return key, value, true
}

// merge fills what m lacks from the metadata of the whole file.
func (m Metadata) merge(file Metadata) Metadata {
	out := file
	if m.Part != "" {
		out.Part = m.Part
	}
	if m.Serial != "" {
		out.Serial = m.Serial
	}
	if m.Lot != "" {
		out.Lot = m.Lot
	}
	if m.Date != "" {
		out.Date = m.Date
	}
	if m.TestLevel != "" {
		out.TestLevel, out.TestLevelV, out.TestLevelA, out.HasTestLevel = m.TestLevel, m.TestLevelV, m.TestLevelA, m.HasTestLevel
	}
	if m.Bias != "" {
		out.Bias, out.BiasV, out.BiasA, out.HasBias = m.Bias, m.BiasV, m.BiasA, m.HasBias
	}
	if m.Temperature != "" {
		out.Temperature, out.TemperatureC, out.HasTemperature = m.Temperature, m.TemperatureC, m.HasTemperature
	}
	if m.mode != "" {
		out.mode = m.mode
	}
	if m.reference != 0 {
		out.reference = m.reference
	}
	return out
}
