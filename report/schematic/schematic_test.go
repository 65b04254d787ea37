package schematic

import (
	"encoding/xml"
	"errors"
	"io"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"realpart/models"
)

// Every library circuit gives well-formed SVG that names each parameter once,
// has one symbol an element, escapes texts and keeps inside its frame.
func TestSVG(t *testing.T) {
	for _, m := range models.Library() {
		labels := make([]string, len(m.Circuit.Parameters()))
		for i := range labels {
			labels[i] = "<1 & " + strconv.Itoa(i)
		}
		svg := SVG(m.Circuit, labels, `a "drawing"`)
		texts := map[string]int{}
		decoder := xml.NewDecoder(strings.NewReader(svg))
		inText := false
		for {
			token, err := decoder.Token()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatalf("%s: %v\n%s", m.Name, err, svg)
			}
			switch e := token.(type) {
			case xml.StartElement:
				inText = e.Name.Local == "text"
			case xml.EndElement:
				inText = false
			case xml.CharData:
				if inText {
					texts[string(e)]++
				}
			}
		}
		for i, p := range m.Circuit.Parameters() {
			n := texts[p.Name] + texts[p.Name+" = "+labels[i]]
			if n != 1 {
				t.Errorf("%s: %s is named %d times", m.Name, p.Name, n)
			}
			if texts[labels[i]]+texts[p.Name+" = "+labels[i]] != 1 {
				t.Errorf("%s: the value of %s is missing", m.Name, p.Name)
			}
		}
		frame := regexp.MustCompile(`viewBox="0 0 (\S+) (\S+)"`).FindStringSubmatch(svg)
		width, _ := strconv.ParseFloat(frame[1], 64)
		height, _ := strconv.ParseFloat(frame[2], 64)
		for _, at := range regexp.MustCompile(`(?:M|<text x="|cx=")(-?[\d.]+)(?: |" c?y=")(-?[\d.]+)`).FindAllStringSubmatch(svg, -1) {
			x, _ := strconv.ParseFloat(at[1], 64)
			y, _ := strconv.ParseFloat(at[2], 64)
			if x < 0 || x > width || y < 0 || y > height {
				t.Errorf("%s: something at %v, %v lies outside %v by %v", m.Name, x, y, width, height)
			}
		}
	}
}

// Each kind of element has its own symbol.
func TestSymbols(t *testing.T) {
	seen := map[string]string{}
	for _, expression := range []string{"R", "L", "C", "loss(C, D)", "cpe(C, D)", "skin(C)", "rcline(C, D)"} {
		c, err := models.Parse(expression)
		if err != nil {
			t.Fatal(err)
		}
		var b strings.Builder
		drawSymbol(&b, c.Root().Element, 100, 100)
		if other, ok := seen[b.String()]; ok {
			t.Errorf("%s and %s look alike", expression, other)
		}
		seen[b.String()] = expression
	}
}
