package ingest

import "math"

// role is what a column holds.
type role uint8

const (
	roleNone role = iota
	roleFreq
	roleOmega // angular frequency
	rolePart
	roleBias        // conditions of the measurement, which may make several
	roleTemperature // sweeps of one table
	// Parts of the impedance Z = R + jX and the admittance Y = G + jB.
	roleZ // complex literal
	roleY
	roleAbsZ
	rolePhase // of Z
	roleR
	roleX
	roleAbsY
	rolePhaseY
	roleG
	roleB
	// Series and parallel equivalents, loss and quality.
	roleCs
	roleCp
	roleLs
	roleLp
	roleRs
	roleRp
	roleD
	roleQ
	// S-parameters; the heading has the ports.
	roleS // complex literal
	roleSRe
	roleSIm
	roleSMag
	roleSdB
	roleSPhase
	// Words that do not say enough alone: their neighbours or a flag must.
	roleMag   // magnitude of something
	roleAngle // phase of something
	roleRe
	roleIm
	roleCapacitance
	roleInductance
	numRoles
)

// roleInfo says how a role is called, with which --columns key it is given, and
// in which SI unit its numbers are kept.
type roleInfo struct {
	name, key, dim string
}

var roles = [numRoles]roleInfo{
	roleNone:        {"not used", "", ""},
	roleFreq:        {"frequency", "f", "Hz"},
	roleOmega:       {"angular frequency", "", "rad/s"},
	rolePart:        {"part", "part", ""},
	roleBias:        {"DC bias", "", "V"},
	roleTemperature: {"temperature", "", "°C"},
	roleZ:           {"complex Z", "", "Ω"},
	roleY:           {"complex Y", "", "S"},
	roleAbsZ:        {"|Z|", "z", "Ω"},
	rolePhase:       {"phase of Z", "phase", "°"},
	roleR:           {"R", "r", "Ω"},
	roleX:           {"X", "x", "Ω"},
	roleAbsY:        {"|Y|", "y", "S"},
	rolePhaseY:      {"phase of Y", "yphase", "°"},
	roleG:           {"G", "g", "S"},
	roleB:           {"B", "b", "S"},
	roleCs:          {"Cs", "cs", "F"},
	roleCp:          {"Cp", "cp", "F"},
	roleLs:          {"Ls", "ls", "H"},
	roleLp:          {"Lp", "lp", "H"},
	roleRs:          {"Rs", "rs", "Ω"},
	roleRp:          {"Rp", "rp", "Ω"},
	roleD:           {"D", "d", "1"},
	roleQ:           {"Q", "q", "1"},
	roleS:           {"complex S", "", "1"},
	roleSRe:         {"real part of S", "", "1"},
	roleSIm:         {"imaginary part of S", "", "1"},
	roleSMag:        {"magnitude of S", "", "1"},
	roleSdB:         {"magnitude of S in dB", "", "dB"},
	roleSPhase:      {"phase of S", "", "°"},
	roleMag:         {"a magnitude", "", ""},
	roleAngle:       {"a phase", "", "°"},
	roleRe:          {"a real part", "", ""},
	roleIm:          {"an imaginary part", "", ""},
	roleCapacitance: {"a capacitance", "", "F"},
	roleInductance:  {"an inductance", "", "H"},
}

// quantity reports whether a column says something about the impedance.
func (r role) quantity() bool {
	switch r {
	case roleNone, roleFreq, roleOmega, rolePart, roleBias, roleTemperature:
		return false
	}
	return true
}

// isAngle: kept in radians once the unit is known.
func (r role) isAngle() bool {
	return r == rolePhase || r == rolePhaseY || r == roleSPhase || r == roleAngle
}

// neverNegative: a negative number is a fault.
func (r role) neverNegative() bool {
	return r == roleAbsZ || r == roleAbsY || r == roleSMag
}

// pair is two quantities that give an impedance.
type pair struct {
	a, b role
	// z computes Z from the two in SI units (angles in radians) at ω = 2πf.
	z func(omega, a, b float64) complex128
}

// pairs in order of preference, where a file has several: the parts of Z
// first, then those that need a conversion. Definitions, sinusoidal steady
// state, sign convention e^{+jωt} (an inductor has X > 0, B < 0, phase > 0):
//
//	Z = R + jX = |Z|·e^{jθ}       Y = 1/Z = G + jB = |Y|·e^{jθY}
//	series circuit:   Z = Rs + 1/(jωCs),  Z = Rs + jωLs
//	parallel circuit: Y = 1/Rp + jωCp,    Y = 1/Rp + 1/(jωLp)
//	D = tan δ = R/|X| = G/|B|,  Q = 1/D
//
// Source: IEC 60384-1, 4.8 and 4.9 (tangent of loss angle, ESR) for D, Cs and
// ESR; the parallel forms and Q are the usual ones of impedance-measurement
// handbooks.
//
// Signs: Cs and Cp are negative where the part is inductive, Ls and Lp where it
// is capacitive. D and Q are the ratio of the absolute values, so R and G come
// out positive; a negative D or Q is taken at its word (a noise reading of a
// nearly lossless part) except beside a negative C or L, where meters that
// compute D = ωRsCs print both with a minus.
var pairs = []pair{
	{roleR, roleX, func(_, r, x float64) complex128 { return complex(r, x) }},
	{roleRs, roleX, func(_, r, x float64) complex128 { return complex(r, x) }},
	{roleAbsZ, rolePhase, func(_, z, phi float64) complex128 { return polar(z, phi) }},
	{roleG, roleB, func(_, g, b float64) complex128 { return 1 / complex(g, b) }},
	{roleAbsY, rolePhaseY, func(_, y, phi float64) complex128 { return polar(1/y, -phi) }},

	{roleCs, roleRs, func(w, c, r float64) complex128 { return complex(r, -1/(w*c)) }},
	{roleCs, roleD, func(w, c, d float64) complex128 { return series(-1/(w*c), loss(d, c)) }},
	{roleCs, roleQ, func(w, c, q float64) complex128 { return series(-1/(w*c), 1/loss(q, c)) }},
	{roleCp, roleG, func(w, c, g float64) complex128 { return 1 / complex(g, w*c) }},
	{roleCp, roleRp, func(w, c, r float64) complex128 { return 1 / complex(1/r, w*c) }},
	{roleCp, roleD, func(w, c, d float64) complex128 { return parallel(w*c, loss(d, c)) }},
	{roleCp, roleQ, func(w, c, q float64) complex128 { return parallel(w*c, 1/loss(q, c)) }},

	{roleLs, roleRs, func(w, l, r float64) complex128 { return complex(r, w*l) }},
	{roleLs, roleQ, func(w, l, q float64) complex128 { return series(w*l, 1/loss(q, l)) }},
	{roleLs, roleD, func(w, l, d float64) complex128 { return series(w*l, loss(d, l)) }},
	{roleLp, roleG, func(w, l, g float64) complex128 { return 1 / complex(g, -1/(w*l)) }},
	{roleLp, roleRp, func(w, l, r float64) complex128 { return 1 / complex(1/r, -1/(w*l)) }},
	{roleLp, roleQ, func(w, l, q float64) complex128 { return parallel(-1/(w*l), 1/loss(q, l)) }},
	{roleLp, roleD, func(w, l, d float64) complex128 { return parallel(-1/(w*l), loss(d, l)) }},

	// R beside a series quantity is Re Z, as Rs is; G is unmistakable.
	{roleCs, roleR, func(w, c, r float64) complex128 { return complex(r, -1/(w*c)) }},
	{roleLs, roleR, func(w, l, r float64) complex128 { return complex(r, w*l) }},
}

// polar is m·e^{jφ}. Unlike cmplx.Rect it costs one Sincos and no checks.
func polar(m, phi float64) complex128 {
	s, c := math.Sincos(phi)
	return complex(m*c, m*s)
}

// series is D·|X| + jX.
func series(x, d float64) complex128 { return complex(d*math.Abs(x), x) }

// parallel is 1/(D·|B| + jB).
func parallel(b, d float64) complex128 { return 1 / complex(d*math.Abs(b), b) }

// loss is D or Q with the sign rule above.
func loss(d, c float64) float64 {
	if c < 0 && d < 0 {
		return -d
	}
	return d
}

// name of a pair, for messages.
func (p pair) name() string { return roles[p.a].name + " and " + roles[p.b].name }

// namedRole is the role that a header word names, false where it names none.
// The words are written without blanks, dots, underscores and hyphens, in small
// letters; Greek letters stay. Common practice, no source. (A switch and not a
// map, which would have to be filled at each start of the program.)
func namedRole(word string) (role, bool) {
	switch word {
	case "f", "freq", "freqs", "frequency", "frequencies", "frequenz", "fréquence", "frequence", "frecuencia", "frequencia", "frequenza",
		"testfreq", "testfrequency", "sweepfreq", "sweepfrequency", "measurementfrequency", "measfreq", "hz", "fhz", "frq", "fre":
		return roleFreq, true
	case "omega", "ω", "angularfrequency", "angfreq", "kreisfrequenz":
		return roleOmega, true
	case "part", "partid", "partname", "partlabel", "serial", "serialno", "serialnumber", "serialnr", "sn", "s/n", "dut", "dutid",
		"dutname", "sample", "samplename", "sampleid", "specimen", "specimenid", "device", "deviceid", "component", "componentid",
		"bauteil", "prüfling":
		return rolePart, true
	case "bias", "dcbias", "biasvoltage", "dcbiasvoltage", "dcvoltage", "vbias", "ubias", "vdc", "biaslevel", "biascurrent",
		"dcbiascurrent", "ibias", "idc":
		return roleBias, true
	case "temperature", "temp", "temperatur", "ambienttemperature", "t(°c)":
		return roleTemperature, true
	case "|z|", "z", "zmag", "magz", "absz", "abs(z)", "|z|mag", "mag|z|", "mag(z)", "magnitude(z)", "modz", "mod(z)", "zmod", "zabs",
		"zmagnitude", "impedance", "|impedance|", "impedancemagnitude", "magnitudeofimpedance", "magnitudez", "impedancemag",
		"absimpedance", "impedanceabs", "impedanz", "impedanzbetrag", "scheinwiderstand", "impédance", "impedancia", "impedanza",
		"impedancemodulus":
		return roleAbsZ, true
	case "theta", "θ", "thetaz", "θz", "ztheta", "zθ", "phasez", "zphase", "phase(z)", "phaseofz", "arg(z)", "argz", "angle(z)", "anglez",
		"zangle", "ang(z)", "angz", "zang", "∠z", "∠", "impedancephase", "phaseofimpedance", "impedanceangle", "θ(z)", "theta(z)", "φz",
		"zphi", "phi(z)", "zdeg", "zphasedeg", "impedancephaseangle", "phaz", "zpha":
		return rolePhase, true
	case "r", "re(z)", "rez", "zre", "zreal", "realz", "real(z)", "z'", "resistance", "zr", "zreal(z)", "impedancereal", "realimpedance",
		"zrealpart", "realpartofz", "realpartz", "widerstand", "wirkwiderstand", "résistance", "resistencia":
		return roleR, true
	case "x", "im(z)", "imz", "zim", "zimag", "imagz", "imag(z)", "z''", "reactance", "xs", "zimaginary", "zimagpart", "imaginarypartofz",
		"imaginaryz", "impedanceimag", "imagimpedance", "reaktanz", "blindwiderstand", "réactance", "reactancia":
		return roleX, true
	case "|y|", "y", "ymag", "magy", "absy", "abs(y)", "mag(y)", "ymod", "yabs", "admittance", "|admittance|", "admittancemagnitude",
		"magnitudey", "admittanz":
		return roleAbsY, true
	case "thetay", "θy", "ytheta", "yθ", "phasey", "yphase", "phase(y)", "phaseofy", "arg(y)", "argy", "angle(y)", "angley", "yangle",
		"admittancephase", "φy", "∠y":
		return rolePhaseY, true
	case "g", "conductance", "re(y)", "rey", "yre", "yreal", "realy", "real(y)", "gp", "leitwert":
		return roleG, true
	case "b", "susceptance", "im(y)", "imy", "yim", "yimag", "imagy", "imag(y)", "bp":
		return roleB, true
	case "cs", "cser", "cseries", "seriesc", "seriescapacitance", "capacitanceseries", "capacitance(series)", "c(series)", "cs(c)", "csc",
		"serienkapazität":
		return roleCs, true
	case "cp", "cpar", "cparallel", "parallelc", "parallelcapacitance", "capacitanceparallel", "capacitance(parallel)", "c(parallel)",
		"parallelkapazität":
		return roleCp, true
	case "ls", "lser", "lseries", "seriesl", "seriesinductance", "inductanceseries", "inductance(series)", "l(series)",
		"serieninduktivität":
		return roleLs, true
	case "lp", "lpar", "lparallel", "parallell", "parallelinductance", "inductanceparallel", "inductance(parallel)", "l(parallel)":
		return roleLp, true
	case "rs", "rser", "rseries", "seriesr", "seriesresistance", "esr", "equivalentseriesresistance", "resistance(series)",
		"resistanceseries", "r(series)":
		return roleRs, true
	case "rp", "rpar", "rparallel", "parallelr", "parallelresistance", "epr", "equivalentparallelresistance", "resistance(parallel)",
		"resistanceparallel", "r(parallel)":
		return roleRp, true
	case "d", "df", "dfactor", "tand", "tanδ", "tandelta", "tan(δ)", "tan(delta)", "tgδ", "tgd", "dissipation", "dissipationfactor",
		"dissfactor", "lossfactor", "losstangent", "losstan", "verlustfaktor":
		return roleD, true
	case "q", "qf", "qfactor", "qualityfactor", "quality", "güte", "gütefaktor":
		return roleQ, true
	case "mag", "magnitude", "magn", "amplitude", "abs", "absolute", "betrag", "modulus", "linmag", "linearmagnitude", "logmag", "mg",
		"module":
		return roleMag, true
	case "phase", "phaseangle", "angle", "ang", "arg", "φ", "phi", "ph", "pha", "phas", "phasenwinkel", "winkel", "argument", "phaseshift",
		"fase":
		return roleAngle, true
	case "re", "real", "realpart", "realteil":
		return roleRe, true
	case "im", "imag", "imaginary", "imaginarypart", "imaginärteil", "imagpart":
		return roleIm, true
	case "c", "cap", "capacitance", "capacity", "kapazität", "capacité", "capacidad", "cx":
		return roleCapacitance, true
	case "l", "ind", "inductance", "induktivität", "lx":
		return roleInductance, true
	}
	return roleNone, false
}
