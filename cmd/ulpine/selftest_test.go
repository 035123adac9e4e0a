package main

import (
	"bytes"
	"os"
	"regexp"
	"strings"
	"testing"
	"time"
)

// TestSelftest: passes, in under a minute, and says what it compared.
func TestSelftest(t *testing.T) {
	if testing.Short() {
		t.Skip("runs half a minute on a busy machine")
	}
	start := time.Now()
	out := must(t, "selftest")
	if took := time.Since(start); took > time.Minute {
		t.Logf("took %v; the aim is a minute on a machine with nothing else to do", took)
	}
	if n := strings.Count(out, "\nok "); n != len(selfChecks()) {
		t.Errorf("%d groups passed of %d:\n%s", n, len(selfChecks()), out)
	}
	if !regexp.MustCompile(`\npassed: \d+ groups, \d{6,} comparisons, [\d.]+ s\n$`).MatchString(out) {
		t.Errorf("the verdict:\n%s", out)
	}
}

// TestSelftestCanFail: one difference, a panic, or nothing compared fail the test,
// and the exit code says so.
func TestSelftestCanFail(t *testing.T) {
	for name, run := range map[string]func(c *checker){
		"differs": func(c *checker) { c.that(true, ""); c.that(false, "1 is not %d", 2) },
		"panics":  func(*checker) { panic("2") },
		"empty":   func(*checker) {},
	} {
		var b bytes.Buffer
		err := runChecks(&b, []selfCheck{{name, run}, {"fine", func(c *checker) { c.that(true, "") }}})
		coded, ok := err.(*exitError)
		if !ok || coded.code != exitFailed || !strings.Contains(b.String(), "FAILED") || !strings.Contains(b.String(), "failed: 1 of 2 groups") {
			t.Errorf("%s: %v\n%s", name, err, b.String())
		}
	}
}

// TestSelftestGoldens: the hashes of the selftest are those of the package's own
// golden file.
func TestSelftestGoldens(t *testing.T) {
	data, err := os.ReadFile("../../quant/elementary/testdata/golden.txt")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range elementaryFunctions {
		if !strings.Contains(string(data), e.name+" sweep "+e.hash+"\n") {
			t.Errorf("%s: the golden file has another hash", e.name)
		}
	}
}
