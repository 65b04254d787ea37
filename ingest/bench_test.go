package ingest

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"strconv"
	"testing"
)

// benchText is a plain sweep: comma, three columns, a header. It rises from
// 100 Hz to 10 MHz; its digits are those of a meter (nine of the frequency, seven
// of |Z|, five behind the point of the phase).
func benchText(points int) []byte {
	var b bytes.Buffer
	b.WriteString("frequency_hz,impedance_ohm,phase_deg\n")
	for i := range points {
		f := 100 * math.Pow(1e5, float64(i)/float64(points-1))
		w := 2 * math.Pi * f
		z := complex(0.02*(1+0.001*math.Sin(float64(7*i))), w*5e-9-1/(w*1e-5))
		fmt.Fprintf(&b, "%.10g,%.7g,%.5f\n", f, cmplx.Abs(z), cmplx.Phase(z)*180/math.Pi)
	}
	return b.Bytes()
}

// readCSV is the least that a reader of such a file must do, with the standard
// library: encoding/csv and three ParseFloat a row.
func readCSV(b *testing.B, data []byte) [3][]float64 {
	r := csv.NewReader(bytes.NewReader(data))
	r.ReuseRecord = true
	var v [3][]float64
	for n := 0; ; n++ {
		rec, err := r.Read()
		if err == io.EOF {
			return v
		}
		if err != nil {
			b.Fatal(err)
		}
		if n == 0 {
			continue
		}
		for i := range v {
			f, err := strconv.ParseFloat(rec[i], 64)
			if err != nil {
				b.Fatal(err)
			}
			v[i] = append(v[i], f)
		}
	}
}

// BenchmarkRead compares reading a sweep (with recognition, SHA-256, conversion
// to Z and sorting) with readCSV; the largest has 20 MB.
func BenchmarkRead(b *testing.B) {
	for _, points := range []int{201, 1601, 20001, 635001} {
		data := benchText(points)
		b.Run(fmt.Sprintf("ingest/%d", points), func(b *testing.B) {
			b.ReportAllocs()
			b.SetBytes(int64(len(data)))
			for b.Loop() {
				s, err := Read("a.csv", bytes.NewReader(data), nil)
				if err != nil || len(s[0].Freq) != points {
					b.Fatal(err)
				}
			}
		})
		b.Run(fmt.Sprintf("csv/%d", points), func(b *testing.B) {
			b.ReportAllocs()
			b.SetBytes(int64(len(data)))
			for b.Loop() {
				if v := readCSV(b, data); len(v[0]) != points {
					b.Fatal(len(v[0]))
				}
			}
		})
	}
}
