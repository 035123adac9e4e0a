package report

import (
	"bytes"
	"embed"
	"encoding/json"
	"fmt"
	"html/template"
	"io"
	"math"
	"strconv"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

//go:embed page
var pageFiles embed.FS

var pageTemplates = template.Must(template.ParseFS(pageFiles, "page/*.html"))

// sectionTable lists the page's sections in order: the template that shows one,
// and what it is given. A section whose data is nil is left out.
var sectionTable = []struct {
	id, heading, template string
	data                  func(v *view) any
}{
	{"verdicts", "Verdicts", "verdicts", verdictSection},
	{"claim", "The question and what was fixed beforehand", "claim", claimSection},
	{"recommend", "How few bits, point by point", "recommend", recommendSection},
	{"step-map-section", "Where the arithmetic differs", "figure", mapSection},
	{"front", "Score against bits, bytes and energy", "figures", frontSection},
	{"differences", "Paired differences", "differences", differenceSection},
	{"contrasts", "Contrasts", "differences", contrastSection},
	{"grids", "Grids", "grids", gridSection},
	{"tuning", "How each arm was tuned", "tuning", tuningSection},
	{"curves", "Loss curves", "curves", curveSection},
	{"roundings", "Stochastic beside nearest rounding", "differences", twinSection},
	{"counters", "What left the range of its format", "counters", counterSection},
	{"kept", "What arithmetic kept", "kept", keptSection},
	{"histograms", "Exponents against the range of formats", "figure", histogramSection},
	{"recall-section", "Recall by class", "recall", recallSection},
	{"costs", "What it would cost", "costs", costSection},
	{"warnings", "Warnings", "list", warningSection},
	{"cautions", "Limits", "list", cautionSection},
	{"runs", "Every run", "runs", runSection},
	{"plan", "The plan", "plan", planSection},
	{"rerun", "How to rerun", "rerun", rerunSection},
	{"glossary", "Words", "glossary", func(*view) any { return glossary }},
}

// shownSentences is the number of sentences of the answer before the rest is
// folded away.
const shownSentences = 6

// pageData is what the page's frame needs.
type pageData struct {
	Heading        string
	Answer         []string // sentence by sentence
	AnswerMore     []string // of them, those that go on about the first one's arms
	AnswerNext     []string // the others
	Brief          []briefRow
	AnswerRest     []string // those that are folded away
	RestCount      string
	Alarms         []fact
	WarningCount   string
	WrittenOn      string
	Code, Digest   string
	Style          template.CSS
	Script, Curves template.JS
	Sections       []section
}

// section is one rendered section.
type section struct {
	ID, Heading string
	Body        template.HTML
}

// fact is a pair of words.
type fact struct{ Head, Text string }

// HTML writes the page: one file that needs nothing else.
func HTML(w io.Writer, s *results.Study) error {
	return newView(s).html(w)
}

// html renders the sections first and then the frame around them, into memory:
// a page with an error in it is never written.
func (v *view) html(w io.Writer) error {
	style, err := v.style()
	if err != nil {
		return err
	}
	script, err := pageFiles.ReadFile("page/script.js")
	if err != nil {
		return fmt.Errorf("report: %w", err)
	}
	p := pageData{
		Heading: v.heading(), Answer: v.sentences(), Brief: v.briefRows(), Alarms: v.alarms(), WrittenOn: day(v.Written),
		Code: plain(v.CodeVersion), Digest: plain(v.StoreDigest),
		// The three are the project's own files and JSON that escapes <, > and &.
		Style: template.CSS(style), Script: template.JS(script), Curves: template.JS(v.curveData()),
	}
	if rest := len(p.Answer) - shownSentences; rest > 1 { // one more is no gain
		p.AnswerRest, p.Answer = p.Answer[shownSentences:], p.Answer[:shownSentences]
		p.RestCount = plural(rest, "more sentence")
	}
	n := 1
	for n < len(p.Answer) && (strings.HasPrefix(p.Answer[n], "They ") || strings.HasPrefix(p.Answer[n], "It ")) {
		n++
	}
	p.AnswerMore, p.AnswerNext = p.Answer[1:n], p.Answer[n:]
	if n := len(warningSection(v).(list).Items); n > 0 {
		p.WarningCount = plural(n, "warning")
	}
	for _, s := range sectionTable {
		data := s.data(v)
		if data == nil {
			continue
		}
		var b bytes.Buffer
		if err := pageTemplates.ExecuteTemplate(&b, s.template, data); err != nil {
			return fmt.Errorf("report: section %s: %w", s.id, err)
		}
		p.Sections = append(p.Sections, section{s.id, s.heading, template.HTML(b.String())})
	}
	var b bytes.Buffer
	if err := pageTemplates.ExecuteTemplate(&b, "page", p); err != nil {
		return fmt.Errorf("report: page: %w", err)
	}
	_, err = w.Write(b.Bytes())
	return err
}

// heading is the study's title, or its plan's name.
func (v *view) heading() string {
	for _, s := range []string{v.Title, v.PlanFile} {
		if plain(s) != "" {
			return plain(s)
		}
	}
	return "A study without a title"
}

// style is the style sheet with both themes; print is always light.
func (v *view) style() (string, error) {
	css, err := pageFiles.ReadFile("page/style.css")
	if err != nil {
		return "", fmt.Errorf("report: %w", err)
	}
	light, dark := draw.Light.Variables(), draw.Dark.Variables()
	var b strings.Builder
	fmt.Fprintf(&b, ":root{%s}\n", light)
	fmt.Fprintf(&b, "@media (prefers-color-scheme:dark){:root:not([data-theme=light]){%s}}\n", dark)
	fmt.Fprintf(&b, ":root[data-theme=dark]{color-scheme:dark;%s}:root[data-theme=light]{color-scheme:light}\n", dark)
	b.WriteString(draw.Classes() + "\n")
	b.Write(css)
	fmt.Fprintf(&b, "@media print{:root:root:root{color-scheme:light;%s}}\n", light)
	return b.String(), nil
}

// alarms are what a reader must see before the verdicts.
func (v *view) alarms() []fact {
	var out []fact
	add := func(head, text string) {
		if plain(text) != "" {
			out = append(out, fact{head, plain(text)})
		}
	}
	add("The claim was changed after the first run.", v.MarginChanged)
	add("No verdict rests on this baseline.", v.BaselineProblem)
	if n := v.FixedClaim.RunsBefore; n > 0 {
		add("The claim came after results.", plural(n, "run")+" of these arms were in the store already when the margin was fixed.")
	}
	for _, e := range v.FixedClaim.Earlier {
		add("Another claim was made over the same runs.", e)
	}
	return out
}

// number is a float that JSON can hold: four significant digits, null when it is
// not finite.
type number float64

// MarshalJSON implements json.Marshaler.
func (n number) MarshalJSON() ([]byte, error) {
	if f := float64(n); math.IsNaN(f) || math.IsInf(f, 0) {
		return []byte("null"), nil
	}
	return []byte(strconv.FormatFloat(float64(n), 'g', 4, 64)), nil
}

// shortened are numbers for the page's script.
func shortened(x []float64) []number {
	out := make([]number, len(x))
	for i, v := range x {
		out[i] = number(v)
	}
	return out
}

// curveData is what the page's script needs for crosshair and replicates.
func (v *view) curveData() []byte {
	type run struct {
		Replicate string   `json:"replicate"` // a string: seeds may exceed what a script's number holds
		Loss      []number `json:"loss"`
	}
	type arm struct {
		Slug string   `json:"slug"`
		Name string   `json:"name"`
		Low  []number `json:"low"`
		Mid  []number `json:"mid"`
		High []number `json:"high"`
		Runs []run    `json:"runs"`
	}
	all := struct {
		Epochs []number `json:"epochs"`
		Arms   []arm    `json:"arms"`
	}{Epochs: []number{}, Arms: []arm{}}
	for _, a := range v.arms {
		c := &a.Training
		if c.empty() {
			continue
		}
		all.Epochs = shortened(c.X)
		j := arm{a.Slug, a.Label(), shortened(c.Low), shortened(c.Mid), shortened(c.High), []run{}}
		for i, r := range c.Runs {
			j.Runs = append(j.Runs, run{strconv.FormatUint(r.Replicate, 10), shortened(c.Each[i])})
		}
		all.Arms = append(all.Arms, j)
	}
	b, err := json.Marshal(all)
	if err != nil {
		panic("report: curve data: " + err.Error()) // numbers and strings only
	}
	return b
}

// figureHTML is a figure's parts for the page, each wide and narrow, with what a
// reader needs to read it; curves says that it takes crosshair and switches.
func figureHTML(v *view, id, caption string, curves bool) template.HTML {
	var b bytes.Buffer
	wides, narrows := drawFigure(v, id, wide), drawFigure(v, id, narrow)
	if len(wides) == 0 {
		return ""
	}
	attr := ""
	if curves {
		attr = ` data-curves="` + id + `"`
	}
	fmt.Fprintf(&b, `<figure id="figure-%s"%s>`, id, attr)
	// Style sheets show one of the two sets; ids differ by the set's name.
	for _, set := range []struct {
		class string
		parts []*draw.Figure
	}{{"wide", wides}, {"narrow", narrows}} {
		fmt.Fprintf(&b, `<div class="%s">`, set.class)
		for _, f := range set.parts {
			_ = f.WriteInline(&b, f.ID+"-"+set.class) // a bytes.Buffer does not fail
		}
		b.WriteString("</div>")
	}
	if curves {
		b.WriteString(`<p class="readout" role="status"></p>`)
	}
	fmt.Fprintf(&b, "<figcaption>%s</figcaption></figure>\n", template.HTMLEscapeString(caption))
	return template.HTML(b.String())
}

// glyphHTML is a small drawing for a line of the page.
func glyphHTML(f *draw.Figure) template.HTML {
	var b bytes.Buffer
	_ = f.WriteGlyph(&b) // a bytes.Buffer does not fail
	return template.HTML(b.String())
}
