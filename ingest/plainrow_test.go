package ingest

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"

	"pgregory.net/rapid"
)

// The short way gives the bits of strconv.ParseFloat wherever it answers.
func FuzzDecimal(f *testing.F) {
	for _, s := range []string{"0", "-0", "1.5", "-89.9", "+1.00004975000E+005", "123456789012345", "1e22", "1e23", "1e-22", ".5", "5.", ".", "-", "1e", "1e+", "0.1e-21", "999999999999999e22", "0x10", "1_0", "1e00005", "1e0000000005", "99999999999999999999"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, end, ok := decimal(s, 0)
		if !ok {
			return
		}
		want, err := strconv.ParseFloat(s[:end], 64)
		if err != nil || math.Float64bits(v) != math.Float64bits(want) {
			t.Errorf("decimal(%q) = %v of %q, ParseFloat gives %v, %v", s, v, s[:end], want, err)
		}
	})
}

func TestDecimalMatchesParseFloat(t *testing.T) {
	answered := 0
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.OneOf(rapid.Float64(), rapid.Float64Range(-1e6, 1e6), rapid.Float64Range(9e15, 9.1e15)).Draw(t, "v")
		format := rapid.SampledFrom([]byte{'e', 'f', 'g'}).Draw(t, "format")
		s := strconv.FormatFloat(v, format, rapid.IntRange(-1, 18).Draw(t, "digits"), 64)
		got, end, ok := decimal(s+",1", 0)
		if !ok {
			return
		}
		answered++
		if want, err := strconv.ParseFloat(s, 64); err != nil || end != len(s) || math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("%q: %v, want %v", s, got, want)
		}
	})
	if answered < 20 {
		t.Errorf("only %d numbers were read the short way", answered)
	}
}

// Up to 2⁵³ every integer is exact; beyond it the short way must not answer.
func TestDecimalLimits(t *testing.T) {
	for s, want := range map[string]bool{
		"9007199254740992": true, "9007199254740993": false, "-9007199254740991e20": true, "1e22": true, "1e23": false, "1e-22": true, "1e-23": false,
		"0.000000000000000001": true, "0.0000000000000000001": false, "0000000000000000001": true, "00000000000000000001": false,
		"36893488147419103233": false, "1e37": false, "9.9e36": false, "": false, "-": false, ".": false, "1e": false,
	} {
		if _, _, ok := decimal(s, 0); ok != want {
			t.Errorf("%q: %v", s, ok)
		}
	}
}

// sameReading compares what two readings gave, errors and reports included.
func sameReading(t *testing.T, data string, o Options) {
	t.Helper()
	describe := func(general bool) string {
		o := o
		o.general = general
		var b strings.Builder
		sweeps, err := Read("a.csv", strings.NewReader(data), &o)
		show := func(r *Reading) {
			if r != nil {
				if err := r.WriteText(&b); err != nil {
					t.Fatal(err)
				}
			}
		}
		if e, ok := err.(*Error); ok {
			fmt.Fprintf(&b, "%v %d %d %v\n", e, e.Line, e.Column, e.Err)
			show(e.Reading)
		}
		for _, s := range sweeps {
			fmt.Fprintf(&b, "%s %s %+v %v %q %v %v %s\n", s.Part, s.Lot, s.Metadata, s.Dropped, s.Warnings, s.Reference, s.Connection, s.SHA256)
			show(&s.Reading)
			for i, f := range s.Freq {
				fmt.Fprintf(&b, "%x %x\n", math.Float64bits(f), []uint64{math.Float64bits(real(s.Z[i])), math.Float64bits(imag(s.Z[i]))})
			}
		}
		return b.String()
	}
	if plain, general := describe(false), describe(true); plain != general {
		t.Errorf("%q\nplain way:\n%s\ngeneral way:\n%s", data, plain, general)
	}
}

const plainSweep = "frequency_hz,impedance_ohm,phase_deg\n100,161.7212,-89.94513\n105.925373,152.8329,-90.10162\n112.201845,144.2961,-89.87\n118.850223,1.36194e2,-89.91\n125.892541,128.5,-89.9\n"

// FuzzPlainRow: all rows the general way give the same.
func FuzzPlainRow(f *testing.F) {
	f.Add(plainSweep, false)
	f.Add(strings.ReplaceAll(plainSweep, "\n", "\r\n"), true)
	f.Add("Range;f (kHz);|Z| (mOhm);Note\n3;1;2;x\n3;2;-1;\n", false)
	f.Add("f (Hz),R (Ohm),X (Ohm)\n1,2,3\n2,9.9E37,4\n3,,4\n\n1,2,3,4\n2,0x1p3,1_0\n", true)
	f.Fuzz(func(t *testing.T, data string, columns bool) {
		o := Options{}
		if columns {
			o.Columns = Columns{"f": "1", "z": "2", "phase": "3"}
		}
		sameReading(t, data, o)
	})
}

// Rows with something wrong in them have the same errors and the same place.
func TestPlainRowAgreesOnDamage(t *testing.T) {
	scraps := []string{",", "\n", "\n\n", " ", "\"", "-", "1", "999999999999999999", "e5", "E-300", ".", "OL", ",,", "\t", "#", "\r\n", "0x1p-3", "1_0", "9.9E37", ";", "+", "\u2212",
		"\nfrequency_hz,impedance_ohm,phase_deg\n", "\n5,6\n", "\n5,6,7,8\n", "\n-1,2,3\n", "\n0,2,3\n", "\n7,0,3\n", "\n8,-1,3\n", "1.0000000000000000000001", "000000000000000000000000", "123456789.123456789"}
	rng := rand.New(rand.NewPCG(1, 1))
	for range 1500 {
		text := plainSweep
		for range 1 + rng.IntN(3) {
			at := rng.IntN(len(text))
			text = text[:at] + scraps[rng.IntN(len(scraps))] + text[min(len(text), at+rng.IntN(3)):]
		}
		o := Options{}
		if rng.IntN(4) == 0 {
			o.Columns = Columns{"f": "1", "z": "2", "phase": "3"}
		}
		sameReading(t, text, o)
	}
}

// The memory that readings share is no part of what they return.
func TestSweepsKeepTheirValues(t *testing.T) {
	first := one(t, "a.csv", plainSweep, nil)
	freq, z := slices.Clone(first.Freq), slices.Clone(first.Z)
	var group sync.WaitGroup
	for range 4 {
		group.Go(func() {
			for _, text := range []string{string(benchText(300)), "Part,f (Hz),R (Ohm),X (Ohm)\na,1,2,3\nb,1,2,3\n", "f (Hz),R a,X a,R b,X b\n100,1,2,3,4\n200,1,2,3,4\n", "omega (rad/s),R (Ohm),X (Ohm)\n100,1,2\n200,3,4\n", "f (Hz),R (Ohm),X (Ohm)\n1,2,x\n"} {
				for range 20 {
					_, _ = Read("b.csv", strings.NewReader(text), nil)
				}
			}
		})
	}
	group.Wait()
	if !slices.Equal(freq, first.Freq) || !slices.Equal(z, first.Z) {
		t.Error("another reading changed a sweep")
	}
	for _, text := range []string{"omega (rad/s),R (Ohm),X (Ohm)\n100,1,2\n200,3,4\n", "f (Hz),R (Ohm),X (Ohm)\n2,3,4\n1,2,3\n"} {
		s := one(t, "c.csv", text, nil)
		freq, z := slices.Clone(s.Freq), slices.Clone(s.Z)
		one(t, "d.csv", plainSweep, nil)
		if !slices.Equal(freq, s.Freq) || !slices.Equal(z, s.Z) {
			t.Errorf("%q: another reading changed the sweep", text)
		}
	}
}

// A row costs no allocation.
func TestRowsDoNotAllocate(t *testing.T) {
	count := func(points int) float64 {
		data := benchText(points)
		return testing.AllocsPerRun(5, func() {
			if _, err := Read("a.csv", bytes.NewReader(data), nil); err != nil {
				t.Fatal(err)
			}
		})
	}
	if few, many := count(201), count(20001); many > few+5 {
		t.Errorf("%v allocations for 201 points, %v for 20,001", few, many)
	}
}

// The plain way and the general way read the same: a quoted cell or another
// part of the file sends the rows of the second text the general way.
func TestPlainRowAgrees(t *testing.T) {
	for _, sep := range []string{",", ", ", ";", "\t", " , "} {
		var plain, general strings.Builder
		plain.WriteString("Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note\n")
		general.WriteString("Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note\n")
		for i := range 200 {
			row := fmt.Sprintf("3%s%.*g%s%.*E%s%.*f%s7\n", sep, 1+i%17, 0.1+float64(i)/3, sep, i%17, 1e5/float64(i+1), sep, i%12, -89.9+float64(i)/7, sep)
			plain.WriteString(row)
			general.WriteString(strings.Replace(row, "3", `"3"`, 1))
		}
		a := one(t, "a.csv", strings.Replace(plain.String(), "Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note", strings.ReplaceAll("Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note", ",", sep), 1), nil)
		b := one(t, "a.csv", strings.Replace(general.String(), "Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note", strings.ReplaceAll("Range,Frequency (kHz),|Z| (mOhm),Phase (deg),Note", ",", sep), 1), nil)
		if len(a.Freq) != len(b.Freq) || len(a.Freq) < 150 {
			t.Fatalf("%q: %d and %d points", sep, len(a.Freq), len(b.Freq))
		}
		for i := range a.Freq {
			if a.Freq[i] != b.Freq[i] || a.Z[i] != b.Z[i] {
				t.Fatalf("%q: point %d: %v %v and %v %v", sep, i, a.Freq[i], a.Z[i], b.Freq[i], b.Z[i])
			}
		}
	}
}
