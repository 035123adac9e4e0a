package draw

import (
	"bytes"
	"strings"
	"testing"
)

// TestRaised: what a picture shows of scripts that its font lacks, or that are
// written from right to left.
func TestRaised(t *testing.T) {
	for in, want := range map[string]string{
		"bf16 nearest":    "bf16 nearest",
		"Q3.12 אבג":       "Q3.12 גבא",
		"אב גד, 9 bits":   "דג בא, 9 bits",
		"量子化 E4M3":        "□□□ E4M3",
		"Größe ≤ 5 µs, λ": "Größe ≤ 5 µs, λ",
		"":                "",
		"x\U0001F9EAy":    "x□y",
		"\U00013000":      "□",
		"a\u0301":         "a\u0301",
		"−0.5 … “quoted”": "−0.5 … “quoted”",
		"ab א 12 ב cd":    "ab א 12 ב cd", // digits keep their order and their side
		"(אבג) and [דהו]": "(גבא) and [והד]",
	} {
		if got := raised(in, false); got != want {
			t.Errorf("%q is drawn as %q, want %q", in, got, want)
		}
	}
}

// TestEveryScript draws names of many scripts in both back ends: no panic, the SVG
// holds them as they are, the PNG has marks.
func TestEveryScript(t *testing.T) {
	names := []string{"עברית", "العربية", "中文 日本語 한국어", "ไทย", "हिन्दी", "Ελληνικά", "Кириллица", "\U0001F44D\U0001F3FD", "<>&\"'", "\u202eevil\u202c", strings.Repeat("א", 300)}
	f := &Figure{ID: "f", Title: "names", Desc: "names", W: 300, H: 20 * float64(len(names))}
	for i, n := range names {
		f.Text(4, 15+20*float64(i), n, Type{Max: 290, Bold: i%2 == 0})
	}
	var svg, png bytes.Buffer
	if err := f.WriteFile(&svg); err != nil {
		t.Fatal(err)
	}
	for _, want := range append(names[:8:8], "&lt;&gt;&amp;") {
		if !strings.Contains(svg.String(), want) {
			t.Errorf("the SVG lacks %q", want)
		}
	}
	if strings.Contains(svg.String(), "\u202e") {
		t.Error("a character that turns the text around it is left in the SVG")
	}
	if err := f.WritePNG(&png, 1); err != nil || png.Len() < 1000 {
		t.Errorf("PNG of %d bytes, %v", png.Len(), err)
	}
}
