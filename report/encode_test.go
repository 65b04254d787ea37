package report

import (
	"bytes"
	"encoding/json"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"
	"testing/quick"
)

// standard encodes a record with encoding/json.
func standard(t *testing.T, f *Fit) string {
	t.Helper()
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(f); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The bytes are those of encoding/json for the tags of the record: with any
// value in every field, those to come included, and with none.
func TestAppendJSONMatchesTags(t *testing.T) {
	same := func(f Fit) bool {
		got, err := AppendJSON(nil, &f)
		if want := standard(t, &f); err != nil || string(got) != want {
			t.Errorf("got %s (%v), want %s", got, err, want)
			return false
		}
		return true
	}
	for _, f := range []*Fit{heron(), otter(), {}, {Figures: []Figure{}, Correlation: [][]float64{}, Sweep: Sweep{Metadata: map[string]string{}}}} {
		same(*f)
	}
	if err := quick.Check(same, nil); err != nil {
		t.Error(err)
	}
	// One field at a time, so that each is seen to be written.
	random := rand.New(rand.NewPCG(3, 5))
	kind := reflect.TypeFor[Fit]()
	for i := range kind.NumField() {
		var f Fit
		fill(reflect.ValueOf(&f).Elem().Field(i), random)
		same(f)
	}
}

// fill gives everything in a value a value that is not zero, with texts and
// numbers of all sorts.
func fill(v reflect.Value, random *rand.Rand) {
	switch v.Kind() {
	case reflect.String:
		texts := []string{"ESR + ESL + (C || Rp)", "Ω", "a\"b\\c\n", "<&>", "\x7f\x01", "a\u2028b\u2029", "\xff\xfe", "½ ≥ 2", "x\xed\xa0\x80"}
		v.SetString(texts[random.IntN(len(texts))])
	case reflect.Float64:
		v.SetFloat((random.Float64() - 0.5) * math.Pow(10, float64(random.IntN(60)-30)))
	case reflect.Int:
		v.SetInt(int64(1 + random.IntN(1e6)))
	case reflect.Bool:
		v.SetBool(true)
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		fill(v.Elem(), random)
	case reflect.Struct:
		for i := range v.NumField() {
			fill(v.Field(i), random)
		}
	case reflect.Slice:
		v.Set(reflect.MakeSlice(v.Type(), 5, 5))
		for i := range v.Len() {
			fill(v.Index(i), random)
		}
	case reflect.Map:
		v.Set(reflect.MakeMap(v.Type()))
		for range 5 {
			key, value := reflect.New(v.Type().Key()).Elem(), reflect.New(v.Type().Elem()).Elem()
			fill(key, random)
			fill(value, random)
			v.SetMapIndex(key, value)
		}
	default:
		panic("a field of a new kind: " + v.Type().String())
	}
}

// Numbers of every size have the digits of encoding/json.
func TestAppendJSONDigits(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	values := []float64{0, math.Copysign(0, -1), 1e-6, math.Nextafter(1e-6, 0), 1e21, math.Nextafter(1e21, 0), 1e-9, 1e-10, 1e-100,
		math.SmallestNonzeroFloat64, math.MaxFloat64, 100, 0.1}
	for exponent := -324; exponent <= 307; exponent++ {
		values = append(values, -(1+9*random.Float64())*math.Pow(10, float64(exponent)), math.Pow(10, float64(exponent)))
	}
	f := &Fit{Correlation: [][]float64{values}}
	got, err := AppendJSON(nil, f)
	if want := standard(t, f); err != nil || string(got) != want {
		t.Errorf("got %s (%v), want %s", got, err, want)
	}
}

// What JSON does not have is an error that names the sweep, and nothing is
// appended.
func TestAppendJSONNotFinite(t *testing.T) {
	for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		f := heron()
		f.Figures[1].Value = v
		got, err := AppendJSON([]byte("x"), f)
		if err == nil || string(got) != "x" {
			t.Errorf("%v: got %s and no error", v, got)
		}
	}
}

// BenchmarkAppendJSON encodes the record of a sweep over five decades, in a
// line of some 13 kB.
func BenchmarkAppendJSON(b *testing.B) {
	s := simulated(b, "cap-esr-esl", []float64{0.02, 5e-9, 10e-6}, logGrid(100, 10e6, 201), 1e-3, nil)
	f := New(s.sweep, s.analysis, Options{})
	line, err := AppendJSON(nil, f)
	if err != nil {
		b.Fatal(err)
	}
	b.SetBytes(int64(len(line)))
	b.ReportAllocs()
	for b.Loop() {
		if line, err = AppendJSON(line[:0], f); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkNew makes the record of an analysis: figures and resonances with
// their intervals.
func BenchmarkNew(b *testing.B) {
	s := simulated(b, "cap-esr-esl", []float64{0.02, 5e-9, 10e-6}, logGrid(100, 10e6, 201), 1e-3, nil)
	b.ReportAllocs()
	for b.Loop() {
		New(s.sweep, s.analysis, Options{})
	}
}
