package ingest_test

import (
	"fmt"
	"os"
	"strings"

	"realpart/ingest"
)

func ExampleRead() {
	text := "Frequency (kHz),|Z| (mOhm),Phase (deg)\n0.1,159160,-89.9\n10,1592,-89.2\n1000,22.4,-18.1\n"
	sweeps, err := ingest.Read("c017.csv", strings.NewReader(text), nil)
	if err != nil {
		fmt.Println(err)
		return
	}
	for i, f := range sweeps[0].Freq {
		fmt.Printf("%s: %.4g Hz, %.4g Ω\n", sweeps[0].Part, f, sweeps[0].Z[i])
	}
	if err := sweeps[0].Reading.WriteText(os.Stdout); err != nil {
		fmt.Println(err)
	}
	// Output:
	// c017: 100 Hz, (0.2778-159.2i) Ω
	// c017: 1e+04 Hz, (0.02223-1.592i) Ω
	// c017: 1e+06 Hz, (0.02129-0.006959i) Ω
	// c017.csv
	//   format     delimited text
	//   encoding   UTF-8
	//   delimiter  comma, decimal point
	//   header     line 1
	//   column 1   "Frequency (kHz)": frequency in kHz
	//   column 2   "|Z| (mOhm)": |Z| in mOhm
	//   column 3   "Phase (deg)": phase of Z in deg
	//   rows       3 read, 0 dropped
}
