package main

import (
	"os"
	"strings"
	"testing"
)

// TestReadmeBench runs the commands of the README's section on numbers, the lines
// that start with "$ ulpine", and finds the lines printed below each in its output,
// in their order.
func TestReadmeBench(t *testing.T) {
	data, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	_, section, ok := strings.Cut(string(data), "## A bench for numbers\n")
	if !ok {
		t.Fatal("the README has no such section")
	}
	section, _, _ = strings.Cut(section, "\n## ")
	commands, rest := 0, []string(nil)
	for line := range strings.Lines(section) {
		text, isCode := strings.CutPrefix(strings.TrimRight(line, "\n"), "    ")
		command, isCommand := strings.CutPrefix(text, "$ ulpine ")
		switch {
		case !isCode:
			rest = nil
		case isCommand:
			commands++
			rest = strings.Split(must(t, words(command)...), "\n")
		case rest != nil:
			for len(rest) > 0 && strings.TrimRight(rest[0], " ") != strings.TrimRight(text, " ") {
				rest = rest[1:]
			}
			if len(rest) == 0 {
				t.Fatalf("the README's line %q is not in the output", text)
			}
			rest = rest[1:]
		}
	}
	if commands < 4 {
		t.Errorf("%d commands", commands)
	}
	for _, verb := range []string{"number", "round", "matmul", "sum", "vectors", "selftest"} {
		if !strings.Contains(section, "ulpine "+verb) {
			t.Errorf("no word about %s", verb)
		}
	}
}

// words splits a command line at spaces outside double quotes.
func words(line string) []string {
	var all []string
	for i, part := range strings.Split(line, `"`) {
		if i%2 == 1 {
			all = append(all, part)
		} else {
			all = append(all, strings.Fields(part)...)
		}
	}
	return all
}
