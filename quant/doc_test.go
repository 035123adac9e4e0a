package quant

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// TestDocNamesTests: the tests that the package's documentation names are there.
func TestDocNamesTests(t *testing.T) {
	doc, err := os.ReadFile("doc.go")
	if err != nil {
		t.Fatal(err)
	}
	files, err := filepath.Glob("*_test.go")
	if err != nil {
		t.Fatal(err)
	}
	var all strings.Builder
	for _, name := range files {
		text, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		all.Write(text)
	}
	names := regexp.MustCompile(`Test\w+`).FindAllString(string(doc), -1)
	if len(names) < 30 {
		t.Fatalf("only %d names", len(names))
	}
	for _, name := range names {
		if !strings.Contains(all.String(), "func "+name+"(t *testing.T)") {
			t.Errorf("no test is called %s", name)
		}
	}
}
