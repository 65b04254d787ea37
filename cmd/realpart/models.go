package main

import (
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"realpart/models"
	"realpart/report"
)

func newModels(s streams) *cobra.Command {
	return &cobra.Command{
		Use:   "models [NAME]",
		Short: "List the circuits of the library, or show one in full",
		Args:  cobra.MaximumNArgs(1),
		ValidArgsFunction: func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
			return libraryNames(), cobra.ShellCompDirectiveNoFileComp
		},
		RunE: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 {
				return listModels(s.out)
			}
			m, ok := models.Lookup(args[0])
			if !ok {
				return usagef("expected the name of a circuit, found %q; `realpart models` lists them%s", args[0], didYouMean(args[0], libraryNames()))
			}
			return showModel(s.out, m)
		},
	}
}

func libraryNames() []string {
	var names []string
	for _, m := range models.Library() {
		names = append(names, m.Name)
	}
	return names
}

func listModels(w io.Writer) error {
	var b strings.Builder
	kind := models.Kind("")
	for _, m := range models.Library() {
		if m.Kind != kind {
			if kind != "" {
				b.WriteByte('\n')
			}
			kind = m.Kind
			fmt.Fprintf(&b, "%s\n", kind)
		}
		fmt.Fprintf(&b, "  %-15s %s\n", m.Name, m.Circuit)
	}
	b.WriteString("\n`+` puts in series, `||` in parallel, and binds tighter. `realpart models NAME` shows one in full.\n")
	_, err := io.WriteString(w, b.String())
	return err
}

func showModel(w io.Writer, m models.Model) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s (%s)\n\n  %s\n\n", m.Name, m.Kind, m.Circuit)
	for _, line := range strings.Split(strings.TrimRight(report.DrawText(m.Circuit, nil), "\n"), "\n") {
		fmt.Fprintf(&b, "  %s\n", line)
	}
	fmt.Fprintf(&b, "\n%s\n\nParameters\n", wrap(m.Describes, 78))
	for _, p := range m.Circuit.Parameters() {
		fmt.Fprintf(&b, "  %-6s %-10s %s\n", p.Name, unitText(p.Unit), p.Quantity)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func unitText(unit string) string {
	if unit == "1" {
		return "(number)"
	}
	return unit
}

// wrap breaks a text into lines of at most width characters.
func wrap(text string, width int) string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(text) {
		if line != "" && len([]rune(line))+1+len([]rune(word)) > width {
			lines = append(lines, line)
			line = ""
		}
		if line != "" {
			line += " "
		}
		line += word
	}
	return strings.Join(append(lines, line), "\n")
}

// didYouMean guesses the intent behind an unknown name.
func didYouMean(name string, known []string) string {
	best, distance := "", 3
	for _, k := range known {
		if d := editDistance(strings.ToLower(name), strings.ToLower(k)); d < distance {
			best, distance = k, d
		}
	}
	if best == "" {
		return ""
	}
	return fmt.Sprintf("; did you mean %q?", best)
}

// editDistance counts the insertions, deletions and replacements that turn a
// into b (Levenshtein).
func editDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			cost := diagonal
			if a[i] != b[j] {
				cost++
			}
			diagonal = row[j+1]
			row[j+1] = min(cost, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
