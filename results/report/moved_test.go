package report

import (
	"bytes"
	"html"
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// TestMovedMargin: a margin changed after the runs is nowhere stamped as fixed.
func TestMovedMargin(t *testing.T) {
	s := invented()
	s.Claim.Metric, s.Claim.Margin = s.Metric, s.Margin // 0.5 pp
	s.FixedClaim = results.FixedClaim{Claim: s.Claim, Hash: results.Hash{1}, Fixed: s.MarginFixed}
	const stamp = "at 0.4 pp on 2026-02-03 09:30 UTC; changed since to 0.5 pp"
	for _, moved := range []bool{false, true} {
		if moved {
			s.FixedClaim.Claim.Margin = 0.004
		}
		var text, markdown, numbers bytes.Buffer
		for _, err := range []error{Table(&text, s, 200, false), Markdown(&markdown, s), JSON(&numbers, s)} {
			if err != nil {
				t.Fatal(err)
			}
		}
		page := html.UnescapeString(pageOf(t, s))
		for name, out := range map[string]string{"terminal": text.String(), "markdown": markdown.String(), "page": page} {
			if strings.Contains(strings.ReplaceAll(out, "\n", " "), stamp) != moved || moved && strings.Contains(out, ", before the first run started") {
				t.Errorf("%s, moved %v: the stamp is wrong", name, moved)
			}
		}
		if strings.Contains(numbers.String(), `"margin_moved": true`) != moved {
			t.Errorf("JSON, moved %v: wrong flag", moved)
		}
	}
	s.FixedClaim.Claim.Metric = "val_loss"
	if got := newView(s).fixedWords(); !strings.HasPrefix(got, "fixed for another metric, val_loss, on 2026") {
		t.Errorf("another metric: %q", got)
	}
}

// TestNoNegativeZero: what rounds to zero is printed without a sign.
func TestNoNegativeZero(t *testing.T) {
	for v, want := range map[float64]string{-0.004: "0.00", 0.004: "0.00", -0.006: "−0.01", 0.006: "+0.01", 0: "0.00"} {
		if got := signed(v, 2); got != want {
			t.Errorf("%v: %s, want %s", v, got, want)
		}
	}
}

// TestNothingToKeep: a ratio without a number gives the reason.
func TestNothingToKeep(t *testing.T) {
	if got := ratioWords(math.NaN()); got != nothingToKeep {
		t.Errorf("got %q", got)
	}
}
