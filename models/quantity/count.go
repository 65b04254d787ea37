package quantity

import "fmt"

// Count gives a number of things in words: "1 point", "2 points". noun is the
// singular of a regular plural.
func Count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}
