package main

import (
	"bytes"
	"os"
	"regexp"
	"strings"
	"testing"
)

// Every command of the README that is shown with its output gives that output;
// a line `…` stands for any lines.
func TestReadme(t *testing.T) {
	data, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir("../..")
	const prompt = "    $ realpart"
	lines := strings.Split(string(data), "\n")
	shown := 0
	for i := 0; i < len(lines); i++ {
		if !strings.HasPrefix(lines[i], prompt) {
			continue
		}
		command := strings.TrimPrefix(lines[i], prompt)
		for strings.HasSuffix(command, `\`) && i+1 < len(lines) {
			i++
			command = strings.TrimSuffix(command, `\`) + " " + strings.TrimSpace(lines[i])
		}
		var want []string
		for i+1 < len(lines) && (strings.HasPrefix(lines[i+1], "    ") || lines[i+1] == "") && !strings.HasPrefix(lines[i+1], "    $") {
			i++
			want = append(want, regexp.QuoteMeta(strings.TrimPrefix(lines[i], "    ")))
		}
		text := strings.TrimRight(strings.Join(want, "\n"), "\n")
		if text == "" {
			continue // a command whose output the README describes
		}
		shown++
		var out, stderr bytes.Buffer
		run(shellWords(t, command), streams{in: strings.NewReader(""), out: &out, err: &stderr})
		pattern := "(?s)^" + strings.ReplaceAll(text, "…\n", "(.*\n)?")
		pattern = strings.TrimSuffix(pattern, "…") + ".*$"
		if !regexp.MustCompile(pattern).MatchString(out.String()) {
			t.Errorf("realpart%s\n--- README:\n%s\n--- got:\n%s%s", command, text, out.String(), stderr.String())
		}
	}
	if shown == 0 {
		t.Error("the README shows no command with its output")
	}
}

// shellWords splits a command line at blanks, single quotes being respected.
func shellWords(t *testing.T, line string) []string {
	t.Helper()
	var words []string
	for _, m := range regexp.MustCompile(`'([^']*)'|(\S+)`).FindAllStringSubmatch(line, -1) {
		words = append(words, m[1]+m[2])
	}
	return words
}
