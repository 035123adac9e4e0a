package report

import (
	"bytes"
	"image/png"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"ulpine/results"
)

func markdownOf(t *testing.T, s *results.Study) string {
	t.Helper()
	var b bytes.Buffer
	if err := Markdown(&b, s); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestMarkdown: the answer first, the page's sections in the page's order, and
// every table rectangular.
func TestMarkdown(t *testing.T) {
	for _, s := range studies() {
		text := markdownOf(t, s.Study)
		at := 0
		for _, sec := range sectionTable {
			k := strings.Index(text[at:], "\n## "+sec.heading+"\n")
			if k >= 0 {
				at += k
			}
			// The plan's text is the page's alone.
			if k < 0 && s.name == "usual" && sec.id != "plan" && sec.id != "grids" {
				t.Errorf("%s: no section %q after %d", s.name, sec.heading, at)
			}
		}
		cells := 0
		for _, l := range strings.Split(text, "\n") {
			if !strings.HasPrefix(l, "|") {
				cells = 0
				continue
			}
			n := strings.Count(strings.ReplaceAll(l, `\|`, ""), "|")
			if cells != 0 && n != cells {
				t.Errorf("%s: %d bars after %d in %q", s.name, n, cells, l)
			}
			cells = n
		}
		for _, bad := range badWords.FindAllString(text, -1) {
			t.Errorf("%s: the text says %q", s.name, bad)
		}
	}
	s := invented()
	text := markdownOf(t, s)
	if !strings.HasPrefix(text, "# 16-bit training without a master copy (invented numbers)\n\n**"+newView(s).sentences()[0]+"**\n") {
		t.Errorf("it begins with %q", text[:200])
	}
	for _, want := range []string{"● within margin", "○ worse than margin", s.Rerun[1], s.StoreDigest, "![Paired differences", "(figures/margin-rail.svg)"} {
		if !strings.Contains(text, want) {
			t.Errorf("the text does not hold %q", want)
		}
	}
}

// TestMarkdownEscapes: names stay names.
func TestMarkdownEscapes(t *testing.T) {
	s := invented()
	s.Arms[1].Name = "a|b *c* _d_ `e` [f](g) <h>\n# i"
	text := markdownOf(t, s)
	if !strings.Contains(text, `a\|b \*c\* \_d\_ \`+"`e\\`"+` \[f\](g) \<h\> # i`) {
		t.Errorf("no escaped name in %q", regexp.MustCompile(`.*a.{0,2}b .*`).FindString(text))
	}
	if strings.Contains(text, "\n# i") || strings.Contains(text, "<h>") {
		t.Error("a name became markup")
	}
	if got := inline("# x"); got != `\# x` {
		t.Errorf("%q", got)
	}
}

// TestMarkdownFigures: every picture that the text shows is written.
func TestMarkdownFigures(t *testing.T) {
	for _, s := range []*results.Study{invented(), gridStudy()} {
		there := map[string]bool{}
		for _, f := range Figures(s) {
			there["figures/"+f.ID+".svg"] = true
		}
		links := regexp.MustCompile(`\]\((figures/[^)]+)\)`).FindAllStringSubmatch(markdownOf(t, s), -1)
		if len(links) < 8 {
			t.Errorf("only %d figures", len(links))
		}
		for _, l := range links {
			if !there[l[1]] {
				t.Errorf("%s is shown and not written", l[1])
			}
		}
	}
}

// TestWriteFigures: white ground, no margin, the same figures.
func TestWriteFigures(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "new")
	s := invented()
	s.Runs, s.Costs, s.Diagnoses = nil, nil, nil // rails, strips and step map are enough here
	if err := WriteFigures(dir, s); err != nil {
		t.Fatal(err)
	}
	for _, f := range Figures(s) {
		svg, err := os.ReadFile(filepath.Join(dir, f.ID+".svg"))
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Contains(svg, []byte(`fill="#ffffff"`)) || bytes.Contains(svg, []byte("#fcfdfc")) {
			t.Errorf("%s is not on white", f.ID)
		}
		file, err := os.Open(filepath.Join(dir, f.ID+".png"))
		if err != nil {
			t.Fatal(err)
		}
		im, err := png.Decode(file)
		file.Close()
		if err != nil {
			t.Fatal(err)
		}
		if r, g, b, _ := im.At(0, 0).RGBA(); r != 0xffff || g != 0xffff || b != 0xffff {
			t.Errorf("%s: the corner is %x %x %x", f.ID, r, g, b)
		}
		if w := im.Bounds().Dx(); w < 2149 || w > 2151 {
			t.Errorf("%s is %d dots wide", f.ID, w)
		}
	}
}
