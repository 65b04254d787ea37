package ingest

import (
	"fmt"
	"math"
	"math/cmplx"
	"sort"

	"realpart/models/quantity"
)

// Fixture is what a test fixture measures by itself: open and short sweeps, and
// if there is one a sweep of a load whose impedance LoadValue (Ω) is known.
type Fixture struct {
	Open, Short, Load *Sweep
	LoadValue         complex128
}

// RangeError says that a fixture sweep does not reach to a frequency of the
// sweep that it is to correct.
type RangeError struct {
	Which     string  // open, short or load
	File      string  // of the fixture sweep
	Freq      float64 // Hz, outside
	Low, High float64 // Hz, the fixture sweep's range
}

func (e *RangeError) Error() string {
	hertz := func(f float64) string { return quantity.Format(f, "Hz", 4) }
	return fmt.Sprintf("%s: expected the %s sweep to cover %s, found %s to %s; try: a fixture sweep over the range of the part's",
		e.File, e.Which, hertz(e.Freq), hertz(e.Low), hertz(e.High))
}

// Apply corrects a sweep for the fixture and returns a new one; the argument is
// left as it is. With Zxm measured, Zo open, Zs short, Zsm the load as measured
// and Zstd its true value:
//
//	open:             Zdut = Zo·Zxm/(Zo − Zxm)                 stray admittance alone
//	short:            Zdut = Zxm − Zs                          residual impedance alone
//	open/short:       Zdut = (Zxm − Zs)/(1 − (Zxm − Zs)·Yo),   Yo = 1/(Zo − Zs)
//	open/short/load:  Zdut = Zstd·(Zs − Zxm)·(Zsm − Zo)/((Zxm − Zo)·(Zs − Zsm))
//
// Open/short assumes a residual impedance in series and a stray admittance
// across the part; open/short/load any linear two-port. (Source: the formulas of
// general impedance-measurement handbooks.) Fixture sweeps are interpolated
// linearly in log frequency, real and imaginary part; outside their range the
// error is a [*RangeError]. The result is no longer measured as S-parameters: S
// is nil.
func (f Fixture) Apply(s *Sweep) (*Sweep, error) {
	switch {
	case f.Load != nil && (f.Open == nil || f.Short == nil):
		return nil, fmt.Errorf("compensation: expected an open and a short sweep beside the load, found %s", f.describe())
	case f.Load != nil && (f.LoadValue == 0 || cmplx.IsNaN(f.LoadValue) || cmplx.IsInf(f.LoadValue)):
		return nil, fmt.Errorf("compensation: expected the load's impedance, found %v; try: --load-value 50", f.LoadValue)
	case f.Open == nil && f.Short == nil:
		return nil, fmt.Errorf("compensation: expected an open or a short sweep, found none")
	}
	out := *s
	out.Freq = append([]float64(nil), s.Freq...)
	out.Z = make([]complex128, len(s.Z))
	out.S, out.Connection, out.Reference = nil, "", 0
	out.Warnings = append([]Warning(nil), s.Warnings...)
	for i, freq := range s.Freq {
		var at [3]complex128
		for k, fx := range []*Sweep{f.Open, f.Short, f.Load} {
			if fx == nil {
				continue
			}
			z, ok := fx.Interpolate(freq)
			if !ok {
				e := &RangeError{Which: []string{"open", "short", "load"}[k], File: fx.File, Freq: freq}
				if n := len(fx.Freq); n > 0 {
					e.Low, e.High = fx.Freq[0], fx.Freq[n-1]
				}
				return nil, e
			}
			at[k] = z
		}
		zo, zs, zsm, zx := at[0], at[1], at[2], s.Z[i]
		var z complex128
		switch {
		case f.Load != nil:
			z = f.LoadValue * ((zs - zx) / (zs - zsm)) * ((zsm - zo) / (zx - zo))
		case f.Open == nil:
			z = zx - zs
		default:
			// 1/(1/(Zxm − Zs) − Yo) without a division by zero for a short.
			d := zx - zs
			z = d / (1 - d/(zo-zs))
		}
		if z == 0 || cmplx.IsNaN(z) || cmplx.IsInf(z) {
			return nil, fmt.Errorf("%s: expected a finite impedance after compensation, found %v at %g Hz; try: check the fixture sweeps, the part measures like the open or the short", s.File, z, freq)
		}
		out.Z[i] = z
	}
	return &out, nil
}

// ParseImpedance reads the text of --load-value: "50", "50Ω" or "50+2j", in Ω.
func ParseImpedance(text string) (complex128, error) {
	z, ok := parseComplex(text)
	if !ok {
		v, err := quantity.Parse(text, "Ω")
		if err != nil {
			return 0, &FlagError{"--load-value", text, "an impedance in Ω such as 50 or 50+2j"}
		}
		z = complex(v, 0)
	}
	if z == 0 {
		return 0, &FlagError{"--load-value", text, "an impedance that is not 0"}
	}
	return z, nil
}

func (f Fixture) describe() string {
	switch {
	case f.Open != nil:
		return "the open only"
	case f.Short != nil:
		return "the short only"
	}
	return "neither"
}

// Interpolate returns Z at a frequency (Hz), linearly in log frequency between
// the neighbouring points, real and imaginary part; ok is false outside the
// sweep. A point's own frequency returns the point, within a relative 1e-9.
func (s *Sweep) Interpolate(freq float64) (z complex128, ok bool) {
	n := len(s.Freq)
	if n == 0 || !(freq > 0) {
		return 0, false
	}
	const same = 1e-9 // meters print the same frequency with other last digits
	k := sort.SearchFloat64s(s.Freq, freq)
	for _, i := range []int{k, k - 1} {
		if i >= 0 && i < n && math.Abs(s.Freq[i]-freq) <= same*freq {
			return s.Z[i], true
		}
	}
	if k == 0 || k == n {
		return 0, false
	}
	t := complex(math.Log(freq/s.Freq[k-1])/math.Log(s.Freq[k]/s.Freq[k-1]), 0)
	return s.Z[k-1]*(1-t) + s.Z[k]*t, true
}
