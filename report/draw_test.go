package report

import (
	"math"
	"strings"
	"testing"

	"github.com/rivo/uniseg"

	"realpart/models"
)

// Every library circuit, and nested ones, drawn without and with values; each
// parameter is named once, and the rails of a parallel group stand above each
// other.
func TestDrawText(t *testing.T) {
	var all strings.Builder
	draw := func(c *models.Circuit) {
		values := make([]float64, len(c.Parameters()))
		for i := range values {
			values[i] = 1.2345e-3
		}
		values[0] = math.NaN()
		all.WriteString(c.String() + "\n\n" + DrawText(c, nil) + "\n" + DrawText(c, values) + "\n")
	}
	for _, m := range models.Library() {
		draw(m.Circuit)
	}
	c, err := models.Parse("R1 || (C1 + (R2 || (L2 + cpe(Q, n)))) || (R3 + L3)")
	if err != nil {
		t.Fatal(err)
	}
	draw(c)
	golden(t, "drawings.txt", all.String())
	for _, m := range models.Library() {
		plain := DrawText(m.Circuit, nil)
		for _, q := range m.Circuit.Parameters() {
			n := 0
			for _, word := range strings.FieldsFunc(plain, func(r rune) bool { return strings.ContainsRune(" ,│\n", r) }) {
				if word == q.Name {
					n++
				}
			}
			if n != 1 {
				t.Errorf("%s: %s stands %d times in\n%s", m.Name, q.Name, n, plain)
			}
		}
		checkRails(t, m.Name, plain)
	}
}

// checkRails checks that below each ┬, ├ and │ there is more of the rail.
func checkRails(t *testing.T, name, drawing string) {
	t.Helper()
	var grid [][]string
	for line := range strings.Lines(drawing) {
		var row []string
		g := uniseg.NewGraphemes(strings.TrimRight(line, "\n"))
		for g.Next() {
			row = append(row, g.Str())
		}
		grid = append(grid, row)
	}
	for y, row := range grid[:len(grid)-1] {
		for x, cell := range row {
			if cell != "┬" && cell != "│" {
				continue
			}
			below := " "
			if x < len(grid[y+1]) {
				below = grid[y+1][x]
			}
			if !strings.Contains("│├┤└┘", below) {
				t.Errorf("%s: a rail ends at line %d, column %d, above %q:\n%s", name, y+1, x+1, below, drawing)
			}
		}
	}
}
