package ingest

import (
	"fmt"
	"math"
	"strconv"
	"strings"
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
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64().Draw(t, "v")
		format := rapid.SampledFrom([]byte{'e', 'f', 'g'}).Draw(t, "format")
		s := strconv.FormatFloat(v, format, rapid.IntRange(-1, 14).Draw(t, "digits"), 64)
		got, end, ok := decimal(s, 0)
		if !ok {
			return
		}
		if want, err := strconv.ParseFloat(s[:end], 64); err != nil || math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("%q: %v, want %v", s, got, want)
		}
	})
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
