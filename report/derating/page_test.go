package derating

import (
	"bytes"
	"encoding/xml"
	"io"
	"regexp"
	"strings"
	"testing"
)

// The page fetches nothing, is well-formed, escapes names from files, and has
// the answer, both figures with their limits in words, and the cautions.
func TestPage(t *testing.T) {
	part := capacitor(t, 50e-3)
	part.Part, part.File, part.SHA256 = `<script>alert(1)</script>`, "a&b.csv", strings.Repeat("ab", 32)
	a := assess(t, []Sweep{part}, nil, "100kHz=4A,20MHz=1A", Conditions{
		RTh: value(20), Ambient: value(60), Limit: value(85), Margin: 10, Voltage: &VoltageConditions{24, value(35), value(0.8)},
	})
	var b, again bytes.Buffer
	made := []Made{{"Command", "realpart derate 'a&b.csv'"}}
	if err := a.WritePage(&b, made); err != nil {
		t.Fatal(err)
	}
	if err := a.WritePage(&again, made); err != nil || !bytes.Equal(b.Bytes(), again.Bytes()) {
		t.Errorf("written twice, the page differs (%v)", err)
	}
	text := b.String()
	for _, want := range []string{
		"EXCEEDED", "Loss by harmonic", "Hot spot over ripple current", "limit 85.0 °C", "limit less the margin 75.0 °C", "current now 4.12 A",
		"&lt;script&gt;", "realpart derate", strings.Repeat("ab", 32), "outside the sweep", "Stored charge", "qualified engineer",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q in the page", want)
		}
	}
	if strings.Contains(text, "<script>") {
		t.Error("a name from a file is markup in the page")
	}
	if n := strings.Count(text, "<svg"); n != 2 {
		t.Errorf("%d figures, want 2", n)
	}
	for _, link := range regexp.MustCompile(`(?:src|href)="([^"]*)"|url\(`).FindAllString(text, -1) {
		if link != `href="data:,"` {
			t.Errorf("the page refers to %s", link)
		}
	}
	d := xml.NewDecoder(strings.NewReader(text))
	d.Strict, d.AutoClose, d.Entity = false, xml.HTMLAutoClose, xml.HTMLEntity
	for {
		if _, err := d.Token(); err == io.EOF {
			break
		} else if err != nil {
			t.Fatalf("the page is not well-formed: %v", err)
		}
	}
	// Without a temperature there is one figure, and without a limit no verdict.
	a = assess(t, []Sweep{part}, nil, "100kHz=4A", Conditions{})
	b.Reset()
	if err := a.WritePage(&b, nil); err != nil || strings.Count(b.String(), "<svg") != 1 || !strings.Contains(b.String(), "No verdict") {
		t.Errorf("%d figures without a temperature (%v)", strings.Count(b.String(), "<svg"), err)
	}
}
