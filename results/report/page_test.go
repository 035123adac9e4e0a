package report

import (
	"bytes"
	"encoding/xml"
	"errors"
	"html"
	"io"
	"regexp"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
)

func pageOf(t *testing.T, s *results.Study) string {
	t.Helper()
	var b bytes.Buffer
	if err := HTML(&b, s); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// elementsOf reads a page with the lenient XML reader: good enough for pages
// whose every element but link and meta is closed.
func elementsOf(t *testing.T, page string) []xml.StartElement {
	t.Helper()
	body := regexp.MustCompile(`(?s)<(style|script)[^>]*>.*?</(style|script)>`).ReplaceAllString(page, "")
	d := xml.NewDecoder(strings.NewReader(body))
	d.Strict, d.AutoClose, d.Entity = false, []string{"meta", "link", "input"}, xml.HTMLEntity
	var out []xml.StartElement
	depth := 0
	for {
		k, err := d.Token()
		if errors.Is(err, io.EOF) {
			if depth != 0 {
				t.Fatalf("%d elements are not closed", depth)
			}
			return out
		}
		if err != nil {
			t.Fatal(err)
		}
		switch k := k.(type) {
		case xml.StartElement:
			depth++
			out = append(out, k.Copy())
		case xml.EndElement:
			depth--
		}
	}
}

func attr(e xml.StartElement, name string) string {
	for _, a := range e.Attr {
		if a.Name.Local == name {
			return a.Value
		}
	}
	return ""
}

// TestPages reads the page of every study: closed elements, unique ids, no
// dangling reference, heads with scope, nothing from a network, no number that
// is not one.
func TestPages(t *testing.T) {
	for _, s := range studies() {
		page := pageOf(t, s.Study)
		var ids, refs []string
		for _, e := range elementsOf(t, page) {
			if id := attr(e, "id"); id != "" {
				if slices.Contains(ids, id) {
					t.Errorf("%s: id %s twice", s.name, id)
				}
				ids = append(ids, id)
			}
			refs = append(refs, strings.Fields(attr(e, "aria-labelledby"))...)
			if h := attr(e, "href"); strings.HasPrefix(h, "#") {
				refs = append(refs, h[1:])
			} else if h != "" && h != "data:," {
				t.Errorf("%s: link to %s", s.name, h)
			}
			if attr(e, "src") != "" {
				t.Errorf("%s: %s with src", s.name, e.Name.Local)
			}
			if e.Name.Local == "th" && attr(e, "scope") == "" {
				t.Errorf("%s: a head of a table without scope", s.name)
			}
		}
		for _, r := range refs {
			if !slices.Contains(ids, r) {
				t.Errorf("%s: nothing has the id %s", s.name, r)
			}
		}
		rest := strings.ReplaceAll(page, "http://www.w3.org/2000/svg", "")
		for _, bad := range []string{"http:", "https:", "@import", "url(", "//cdn", "fetch(", "XMLHttpRequest"} {
			if strings.Contains(rest, bad) {
				t.Errorf("%s: the page holds %q", s.name, bad)
			}
		}
		for _, bad := range badWords.FindAllString(rest[strings.Index(rest, "<main>"):strings.Index(rest, "</main>")], -1) {
			t.Errorf("%s: the page says %q", s.name, bad)
		}
	}
}

// badWords are numbers that are none, and what formatting leaves behind when it fails.
var badWords = regexp.MustCompile(`NaN %|\[NaN|NaN\]|NaN, |>NaN</td>|[+-−]Inf\b|%!|!\(|ZgotmplZ`)

// TestPageOrder holds the answer to the first place and the sections to theirs.
func TestPageOrder(t *testing.T) {
	s := invented()
	page := pageOf(t, s)
	at := strings.Index(page, "<main>")
	for _, want := range []string{
		html.EscapeString(newView(s).sentences()[0]), `id="verdicts"`, `id="claim"`, `id="recommend"`, `id="front"`, `id="differences"`, `id="contrasts"`, `id="curves"`,
		`id="counters"`, `id="recall-section"`, `id="cautions"`, `id="runs"`, `id="plan"`, `id="rerun"`, `id="glossary"`,
	} {
		k := strings.Index(page[at:], want)
		if k < 0 {
			t.Fatalf("%s is missing or comes too early", want)
		}
		at += k
	}
}

// TestPageEscapes looks for markup that names and plans tried to smuggle in.
func TestPageEscapes(t *testing.T) {
	s := invented()
	evil := `</script><script>alert('x')</script><img src=x onerror=alert(1)>`
	s.Title, s.Question, s.Answer, s.Data, s.PlanFile, s.Rerun = evil, evil, evil, evil, evil, []string{evil}
	s.Warnings, s.Cautions, s.Classes = []string{evil}, []string{evil}, []string{evil, evil}
	s.Arms[1].Name, s.Arms[2].LossScale, s.Arms[1].Slug = evil, evil, evil
	for i := range s.Runs {
		if s.Runs[i].Arm == "bf16-stochastic-update" {
			s.Runs[i].Arm = evil
		}
	}
	s.Comparisons[0].Arm, s.Comparisons[0].Warnings = evil, []string{evil}
	page := pageOf(t, s)
	if n := strings.Count(page, "<script"); n != 2 {
		t.Errorf("%d scripts, want the page's two", n)
	}
	if strings.Contains(page, "<img") || strings.Contains(page, "</script><script>alert") {
		t.Error("markup of a name became markup of the page")
	}
	elementsOf(t, page)
}

// TestPageSays looks for what a sceptical reader asks for.
func TestPageSays(t *testing.T) {
	s := invented()
	s.MarginChanged, s.BaselineProblem = "margin was 0.004, is 0.005", ""
	page := html.UnescapeString(pageOf(t, s))
	words := []string{
		s.Question, "2026-02-03 09:30 UTC", "before the first run started", "at most 0.5 percentage points below", "95 %", s.StoreDigest,
		"The claim was changed after the first run.", s.MarginChanged, "needs about 46 pairs", "diverged 3 of 10", "within margin", "worse than margin",
		"3840 terms", "15360", "no approval for a safety-related use", "Clopper-Pearson", s.Rerun[0], s.Warnings[0], s.Cautions[0], "skewness 1.4",
		"prefers-color-scheme", "forward.weight = bfloat16", "n = 10",
	}
	for _, a := range s.Arms {
		words = append(words, plain(a.Name))
	}
	for i := range s.Runs {
		words = append(words, s.Runs[i].Name(), strings.ToLower(plain(hexOf(s.Runs[i].Digest))))
	}
	for _, w := range words {
		if !strings.Contains(page, w) {
			t.Errorf("the page does not say %q", w)
		}
	}
	// Every mean of the verdict table stands with its interval and n.
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		v := newView(s)
		row := regexp.MustCompile(`(?s)<tr role="row" data-arm="` + c.Arm + `">.*?</tr>`).FindString(page)
		for _, w := range []string{v.words.diff(c.Mean), v.words.interval(c.Low, c.High), ">10<"} {
			if !strings.Contains(row, w) {
				t.Errorf("row of %s lacks %s", c.Arm, w)
			}
		}
	}
}

func TestFirstRunAfterMargin(t *testing.T) {
	s := invented()
	s.Runs[3].Started = s.MarginFixed.Add(-1)
	if !strings.Contains(pageOf(t, s), "AFTER the first run") {
		t.Error("the page does not say that the margin came after a run")
	}
}

// TestWordsExplained: each word of a verdict and of the tables has its entry.
func TestWordsExplained(t *testing.T) {
	all := ""
	for _, e := range glossary {
		all += e.Word + " " + e.Meaning + "\n"
		if e.Meaning == "" {
			t.Errorf("%s is not explained", e.Word)
		}
	}
	for _, w := range []string{"plan", "arm", "replicate", "run", "rounding point", "control", "margin", "verdict", "Undecided", "diverged", "stalled", "noise floor", "digest", "recall", "Pareto"} {
		if !strings.Contains(all, w) {
			t.Errorf("%s is not in the glossary", w)
		}
	}
}

func hexOf(h results.Hash) string {
	const digits = "0123456789abcdef"
	var b []byte
	for _, x := range h {
		b = append(b, digits[x>>4], digits[x&15])
	}
	return string(b)
}
