package plan

import "testing"

func TestEdits(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{
		{"", "", 0},
		{"", "ab", 2},
		{"batch", "batch", 0},
		{"bacth", "batch", 1},
		{"kitten", "sitting", 3},
		{"epoch", "epochs", 1},
		{"ca", "abc", 3},
		{"é", "e", 1},
	} {
		if got := edits(c.a, c.b); got != c.want {
			t.Errorf("edits(%q, %q) = %d, want %d", c.a, c.b, got, c.want)
		}
		if got := edits(c.b, c.a); got != c.want {
			t.Errorf("edits(%q, %q) = %d, want %d", c.b, c.a, got, c.want)
		}
	}
}

func TestSuggest(t *testing.T) {
	known := []string{"epochs", "batch", "optimizer"}
	for word, want := range map[string]string{
		"epcohs":    `did you mean "epochs"?`,
		"Batch":     `did you mean "batch"?`,
		"optimiser": `did you mean "optimizer"?`,
		"margin":    "write one of batch, epochs, optimizer",
		"":          "write one of batch, epochs, optimizer",
	} {
		if got := suggest(word, known); got != want {
			t.Errorf("suggest(%q) = %q, want %q", word, got, want)
		}
	}
}
