package ingest

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"strconv"
	"testing"
)

// benchText is a plain sweep: comma, three columns, a header.
func benchText(points int) []byte {
	var b bytes.Buffer
	b.WriteString("Frequency (Hz),|Z| (Ohm),Phase (deg)\n")
	for i := range points {
		f := 100 + 137.25*float64(i)
		fmt.Fprintf(&b, "%.7g,%.6g,%.5g\n", f, 1e5/f+0.0213, -89.9+float64(i%800)/10)
	}
	return b.Bytes()
}

// BenchmarkRead compares reading a sweep (with recognition, SHA-256, conversion
// to Z and sorting) with the least that a reader of such a file must do:
// encoding/csv and three ParseFloat a row.
func BenchmarkRead(b *testing.B) {
	for _, points := range []int{201, 1601, 20001} {
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
				n := 0
				r := csv.NewReader(bytes.NewReader(data))
				r.ReuseRecord = true
				var v [3][]float64
				for {
					rec, err := r.Read()
					if err == io.EOF {
						break
					}
					if err != nil {
						b.Fatal(err)
					}
					if n++; n == 1 {
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
				if len(v[0]) != points {
					b.Fatal(len(v[0]))
				}
			}
		})
	}
}
