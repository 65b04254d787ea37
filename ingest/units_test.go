package ingest

import (
	"strings"
	"testing"
)

// The units that are known at once are what the search finds.
func TestCommonUnits(t *testing.T) {
	for _, text := range strings.Fields("Hz hz kHz khz MHz mhz GHz ghz Ω Ohm ohm mΩ mOhm kΩ kOhm ° deg rad F µF uF nF pF H mH µH uH nH S mS dB %") {
		got, ok := commonUnit(text)
		want, found, ambiguous := searchUnit(text)
		if !ok || !found || ambiguous || got != want {
			t.Errorf("%s: %v %v, want %v %v %v", text, got, ok, want, found, ambiguous)
		}
	}
}
