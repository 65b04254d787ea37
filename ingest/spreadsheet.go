package ingest

import "strings"

// splitSheet cuts "file.xlsx#sheet" in two.
func splitSheet(path string) (file, sheet string) {
	if i := strings.LastIndex(strings.ToLower(path), ".xlsx#"); i >= 0 {
		return path[:i+5], path[i+6:]
	}
	return path, ""
}
