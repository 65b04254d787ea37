package ingest

import (
	"bytes"
	"errors"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// The Touchstone specification gives one impedance in both versions: 1.1 with
// values normalised to 75 Ω, 2.0 in ohms beside another reference (restated from
// versions 1.1 and 2.0, IBIS Open Forum).
func TestTouchstoneSpecificationPair(t *testing.T) {
	v1 := `! 1-port Z-parameter data
# MHz Z MA R 75
100 .99 -4
200 .80 -22
300 .707 -45
400 .40 -62
500 .01 -89
`
	v2 := `[Version] 2.0
# MHz Z MA
[Number of Ports] 1
[Number of Frequencies] 5
[Reference] 20.0
[Network Data]
100 74.25 -4
200 60 -22
300 53.025 -45
400 30 -62
500 0.75 -89
[End]
`
	want := []complex128{cmplx.Rect(74.25, -4/deg), cmplx.Rect(60, -22/deg), cmplx.Rect(53.025, -45/deg), cmplx.Rect(30, -62/deg), cmplx.Rect(0.75, -89/deg)}
	for name, text := range map[string]string{"a.s1p": v1, "a.ts": v2, "-": v2} {
		s := one(t, name, text, nil)
		for i := range want {
			if !near(s.Z[i], want[i], 1e-14) || !(math.Abs(s.Freq[i]/(float64(i+1)*100e6)-1) < 1e-15) {
				t.Errorf("%s: Z = %v at %v, want %v", name, s.Z[i], s.Freq[i], want[i])
			}
		}
		if s.S != nil {
			t.Errorf("%s: Z-parameters are not measured S-parameters", name)
		}
	}
	// The specification's other one-port example.
	s := one(t, "b.s1p", "# MHz S MA R 50\n2.000 0.894 -12.136\n", nil)
	if want := cmplx.Rect(0.894, -12.136/deg); !near(s.S[0], want, 1e-14) || s.Reference != 50 || s.Connection != ConnectionReflection {
		t.Errorf("S = %v, want %v", s.S[0], want)
	}
}

// Check values of the collected list, section 9 (calculated there), Z0 = 50 Ω.
var sTable = []struct{ z, reflection, series, shunt complex128 }{
	{25, -1.0 / 3, 0.8, 0.5},
	{50 + 50i, 0.2 + 0.4i, 0.6 - 0.2i, 0.7692307692 + 0.1538461538i},
	{0.01, -0.99960008, 0.99990001, 3.9984006e-4},
	{-100i, 0.6 - 0.8i, 0.5 + 0.5i, 0.9411764706 - 0.2352941176i},
	{10000, 0.9900497512, 9.900990099e-3, 0.9975062344},
}

func TestImpedanceFromS(t *testing.T) {
	for _, c := range sTable {
		for _, k := range []struct {
			connection string
			s          complex128
		}{{ConnectionReflection, c.reflection}, {ConnectionSeries, c.series}, {ConnectionShunt, c.shunt}} {
			if got := SFromImpedance(c.z, 50, k.connection); !near(got, k.s, 2e-8) {
				t.Errorf("%s: S of %v = %v, want %v", k.connection, c.z, got, k.s)
			}
			if got := ImpedanceFromS(SFromImpedance(c.z, 50, k.connection), 50, k.connection); !near(got, c.z, 1e-11) {
				t.Errorf("%s: Z = %v, want %v", k.connection, got, c.z)
			}
		}
	}
	// Levels in dB, same table.
	for s, db := range map[complex128]float64{-1.0 / 3: -9.5424, 0.8: -1.9382, 0.5: -6.0206, 9.900990099e-3: -40.0864} {
		if got := fromDB(db); !(math.Abs(got/cmplx.Abs(s)-1) < 1e-5) {
			t.Errorf("%v dB = %v, want %v", db, got, cmplx.Abs(s))
		}
	}
}

// A two-port of each kind in S, Y and Z gives the same part. The matrices are
// those of a part in series (Y form) and to ground (Z form) with small extra
// elements, since either alone has no Z or Y matrix.
func TestTwoPorts(t *testing.T) {
	z := complex(3, -40)
	// S of a series part and of a shunt part, all four parameters.
	series := [4]complex128{z / (z + 100), 100 / (z + 100), 100 / (z + 100), z / (z + 100)}
	shunt := [4]complex128{-25 / (z + 25), z / (z + 25), z / (z + 25), -25 / (z + 25)}
	line := func(v [4]complex128, order [4]int, scale float64) string {
		var b strings.Builder
		b.WriteString("1.5")
		for _, k := range order {
			b.WriteString(" " + number(real(v[k])*scale) + " " + number(imag(v[k])*scale))
		}
		return b.String() + "\n"
	}
	v1, v2 := [4]int{0, 1, 2, 3}, [4]int{0, 2, 1, 3}
	y := 1 / z
	for _, c := range []struct {
		name, file, text string
		connection       string
	}{
		{"series", "a.s2p", "# MHz S RI R 50\n" + line(series, v1, 1), ConnectionSeries},
		{"shunt", "a.s2p", "# MHz S RI R 50\n" + line(shunt, v1, 1), ConnectionShunt},
		{"series by content", "a.txt", "! bench\n# MHz S RI R 50\n" + line(series, v1, 1), ConnectionSeries},
		{"series Y, normalised", "a.s2p", "# MHz Y RI R 50\n" + line([4]complex128{y, -y, -y, y}, v1, 50), ConnectionSeries},
		{"shunt Z, normalised", "a.s2p", "# MHz Z RI R 50\n" + line([4]complex128{z, z, z, z}, v1, 1.0/50), ConnectionShunt},
		{"series, version 2, 12_21", "a.ts", "[Version] 2.0\n# MHz S RI R 50\n[Number of Ports] 2\n[Two-Port Data Order] 12_21\n[Network Data]\n" + line(series, v2, 1) + "[End]\n", ConnectionSeries},
		{"series Y, version 2", "a.ts", "[Version] 2.0\n# MHz Y RI\n[Number of Ports] 2\n[Two-Port Data Order] 21_12\n[Reference]\n75\n75\n[Network Data]\n" + line([4]complex128{y, -y, -y, y}, v1, 1), ConnectionSeries},
		{"shunt Z, version 2, lower", "a.ts", "[Version] 2.1\n# MHz Z RI\n[Number of Ports] 2\n[Two-Port Data Order] 21_12\n[Matrix Format] Lower\n[Begin Information]\nSerial: 7\n[End Information]\n[Network Data]\n" + line([4]complex128{z, z, z, z}, v1, 1)[:len("1.5")] + strings.Repeat(" 3 -40", 3) + "\n", ConnectionShunt},
		{"data over two lines, version 2", "a.ts", "[Version] 2.0\n# MHz S RI R 50\n[Number of Ports] 2\n[Two-Port Data Order] 21_12\n[Network Data]\n" + strings.Replace(line(series, v1, 1), " ", "\n", 5) + "[End]\n", ConnectionSeries},
		{"noise data", "a.s2p", "# MHz S RI R 50\n" + line(series, v1, 1) + "! noise\n1.5 0.7 0.64 69 0.38\n2 0.7 0.64 69 0.38\n", ConnectionSeries},
		{"comments behind data, second option line", "a.s2p", "! serial: 7\n# MHz S RI R 50 ! options\n" + strings.TrimSuffix(line(series, v1, 1), "\n") + " ! point\n# GHz Z MA\n", ConnectionSeries},
		{"defaults", "a.s2p", "#\n" + "0.0015 " + number(cmplx.Abs(series[0])) + " " + number(cmplx.Phase(series[0])*deg) +
			strings.Repeat(" "+number(cmplx.Abs(series[1]))+" "+number(cmplx.Phase(series[1])*deg), 2) + " 0 0\n", ConnectionSeries},
		{"small letters, other order", "a.s2p", "# r 50 ri s mhz\n" + line(series, v1, 1), ConnectionSeries},
		{"R against the sign", "a.s2p", "#MHz S RI R 50\n" + line(series, v1, 1), ConnectionSeries},
	} {
		s := one(t, c.file, c.text, &Options{Connection: c.connection})
		if len(s.Z) != 1 || !near(s.Z[0], z, 1e-12) || !(math.Abs(s.Freq[0]/1.5e6-1) < 1e-15) || s.Connection != c.connection {
			t.Errorf("%s: Z = %v at %v (%s), want %v at 1.5e6", c.name, s.Z, s.Freq, s.Connection, z)
		}
	}
	// Reflection at port 1 of a two-port file.
	s := one(t, "a.s2p", "# MHz S RI R 50\n1 0.2 0.4 0 0 0 0 0 0\n", &Options{Connection: ConnectionReflection})
	if !near(s.Z[0], 50+50i, 1e-14) {
		t.Errorf("reflection: %v", s.Z[0])
	}
}

func TestTouchstoneErrors(t *testing.T) {
	for _, c := range []struct{ file, text, want string }{
		{"a.s2p", "# Hz S RI R 50\n1 1 2 3 4 5 6 7 8\n", `a.s2p:1:1: expected how the part was connected, found two ports; try: --connection series, shunt or reflection`},
		{"a.s1p", "# Hz S RI R 50\n1 0 x\n2 0\n", `a.s1p:2:5: expected a number, found "x"; try: remove the line (and 1 more)`},
		{"a.s1p", "# Hz S RI R 50\n1 0 0 0\n", `a.s1p:2:1: expected 3 numbers for 1-port data, found "1 0 0 0"; try: the file ending that fits the number of ports`},
		{"a.s1p", "1 0 0\n", `a.s1p:1:1: expected an option line such as # Hz S RI R 50 before the data, found "1 0 0"`},
		{"a.s1p", "# Hz S XX R 50\n1 0 0\n", `a.s1p:1:8: expected an option: a frequency unit, S, Y or Z, DB, MA or RI, R and a resistance, found "XX"`},
		{"a.s1p", "# Hz S RI R -50\n1 0 0\n", `a.s1p:1:13: expected an option: a frequency unit, S, Y or Z, DB, MA or RI, R and a resistance, found "-50"`},
		{"a.s2p", "# Hz H RI R 50\n1 1 2 3 4 5 6 7 8\n", `a.s2p:1:1: expected S-, Y- or Z-parameters, found "# Hz H RI R 50"`},
		{"a.s3p", "# Hz S RI R 50\n1 1 2 3 4 5 6\n", `a.s3p:2:1: expected one or two ports, found "1 1 2 3 4 5 6"; try: a file of the two ports that the part was connected to`},
		{"a.s1p", "# Hz S RI R 50\n", `a.s1p:1:1: expected rows of numbers, found only an option line`},
		{"a.s1p", "! nothing\n", `a.s1p:1:1: expected an option line such as # Hz S RI R 50, found none`},
		{"a.s1p", "# Hz S RI R 50\n-1 0 0\n", `a.s1p:2:1: expected a frequency that is not negative, found "-1 0 0"`},
		{"a.ts", "[Version] 2.0\n# Hz S RI\n[Number of Ports] 1\n[Number of Frequencies] 3\n[Network Data]\n1 0 0\n[End]\n", `a.ts:7:1: expected 3 frequencies ([Number of Frequencies]), found 1; try: a complete file`},
		{"a.ts", "[Version] 3.0\n# Hz S RI\n", `a.ts:1:1: expected [Version] 2.0 or 2.1, found "[Version] 3.0"`},
		{"a.s2p", "# Hz S RI R 50\n1 1 2 3 4\n", `a.s2p:2:1: expected 9 numbers for 2-port data, found "1 1 2 3 4"; try: complete or remove the last lines`},
	} {
		_, err := Read(c.file, strings.NewReader(c.text), nil)
		if err == nil || err.Error() != c.want {
			t.Errorf("%q:\n got %v\nwant %s", c.text, err, c.want)
		}
		if want := c.file == "a.s2p" && strings.Contains(c.want, "connected"); errors.Is(err, ErrConnection) != want {
			t.Errorf("%q: ErrConnection is %v, want %v", c.text, !want, want)
		}
	}
	_, err := Read("a.s2p", strings.NewReader("# Hz S RI R 50 75\n1 0 0 1 0 1 0 0 0\n"), &Options{Connection: ConnectionSeries})
	if err == nil || !strings.Contains(err.Error(), "the same reference resistance") {
		t.Errorf("two references: %v", err)
	}
	_, err = Read("a.s1p", strings.NewReader("# Hz S RI R 50\n1 0 0\n"), &Options{Connection: ConnectionShunt})
	if !errors.Is(err, ErrUsage) || !strings.Contains(err.Error(), "expected two ports for --connection shunt, found one port") {
		t.Errorf("one port in shunt: %v", err)
	}
}

// A perfect match in DB has no finite level.
func TestTouchstoneMatch(t *testing.T) {
	var b bytes.Buffer
	if err := WriteTouchstone(&b, []float64{1e6}, []complex128{50}, nil, TouchstoneFormat{Format: "DB"}); err != nil {
		t.Fatal(err)
	}
	if s := one(t, "a.s1p", b.String(), nil); !near(s.Z[0], 50, 1e-15) {
		t.Errorf("%v", s.Z[0])
	}
}

// S-parameters in a CSV: with S21 there, the connection must be told, and it
// picks the parameter.
func TestPortsInDelimitedText(t *testing.T) {
	z := complex(3, -40)
	row := func(of func(complex128) complex128) string {
		v := of(z)
		return "," + number(real(v)) + "," + number(imag(v))
	}
	s11 := func(z complex128) complex128 { return SFromImpedance(z, 50, ConnectionReflection) }
	shunt := func(z complex128) complex128 { return SFromImpedance(z, 50, ConnectionShunt) }
	head := "Freq (Hz)"
	both := head + ",S11 re,S11 im,S21 re,S21 im\n1e6" + row(s11) + row(shunt) + "\n"
	one11 := head + ",S11 re,S11 im\n1e6" + row(s11) + "\n"
	one21 := head + ",S21 re,S21 im\n1e6" + row(shunt) + "\n"
	for _, c := range []struct {
		text, connection string
		cause            error
	}{
		{both, "", ErrConnection}, {both, ConnectionReflection, nil}, {both, ConnectionShunt, nil},
		{one11, "", nil}, {one11, ConnectionReflection, nil}, {one11, ConnectionShunt, ErrUsage},
		{one21, "", ErrConnection}, {one21, ConnectionReflection, ErrUsage}, {one21, ConnectionShunt, nil},
	} {
		s, err := Read("a.csv", strings.NewReader(c.text), &Options{Connection: c.connection})
		if c.cause != nil {
			if !errors.Is(err, c.cause) {
				t.Errorf("%q, %q: %v, want %v", c.text, c.connection, err, c.cause)
			}
			continue
		}
		if err != nil || !near(s[0].Z[0], z, 1e-12) {
			t.Errorf("%q, %q: %v %v", c.text, c.connection, s, err)
		}
	}
}

// Writing and reading gives back the impedance.
func TestTouchstoneRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := TouchstoneFormat{
			Parameter: rapid.SampledFrom([]string{"S", "Z", "Y"}).Draw(t, "parameter"),
			Format:    rapid.SampledFrom([]string{"RI", "MA", "DB"}).Draw(t, "format"),
			Unit:      rapid.SampledFrom([]string{"Hz", "kHz", "MHz", "GHz"}).Draw(t, "unit"),
			Reference: rapid.SampledFrom([]float64{50, 75, 1}).Draw(t, "reference"),
		}
		var freq []float64
		var z []complex128
		at := 1.0
		for range rapid.IntRange(1, 20).Draw(t, "points") {
			at *= rapid.Float64Range(1.001, 10).Draw(t, "step")
			freq = append(freq, at)
			z = append(z, cmplx.Rect(math.Pow(10, rapid.Float64Range(-3, 6).Draw(t, "log |Z|")), rapid.Float64Range(-1.57, 1.57).Draw(t, "phase")))
		}
		var b bytes.Buffer
		if err := WriteTouchstone(&b, freq, z, []string{"10 µF, two\nlines"}, f); err != nil {
			t.Fatal(err)
		}
		for _, c := range b.Bytes() {
			if c > 0x7e {
				t.Fatalf("not ASCII: %s", b.String())
			}
		}
		s, err := Read("a.s1p", &b, nil)
		if err != nil {
			t.Fatal(err)
		}
		for i := range freq {
			// An S-parameter holds Z relative to the reference.
			a := cmplx.Abs(z[i])
			tol := 1e-13 * (2 + a/f.Reference + f.Reference/a)
			if !near(s[0].Z[i], z[i], tol) || !(math.Abs(s[0].Freq[i]/freq[i]-1) < 1e-15) {
				t.Fatalf("%+v: Z = %v at %v, want %v at %v", f, s[0].Z[i], s[0].Freq[i], z[i], freq[i])
			}
		}
	})
}

func TestWriteTouchstoneErrors(t *testing.T) {
	var b bytes.Buffer
	for name, err := range map[string]error{
		"lengths":     WriteTouchstone(&b, []float64{1}, nil, nil),
		"descending":  WriteTouchstone(&b, []float64{2, 1}, []complex128{1, 1}, nil),
		"not finite":  WriteTouchstone(&b, []float64{1}, []complex128{cmplx.Inf()}, nil),
		"H parameter": WriteTouchstone(&b, []float64{1}, []complex128{1}, nil, TouchstoneFormat{Parameter: "H"}),
		"resistance":  WriteTouchstone(&b, []float64{1}, []complex128{1}, nil, TouchstoneFormat{Reference: -1}),
	} {
		if err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}
