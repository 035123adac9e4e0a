package report

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"regexp"
	"slices"
	"strings"
	"testing"

	"ulpine/results/report/draw"
)

// tokens reads XML to its end and returns what it holds.
func tokens(t *testing.T, b []byte) (elements []xml.StartElement, text string) {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(b))
	var words strings.Builder
	for {
		k, err := d.Token()
		if errors.Is(err, io.EOF) {
			return elements, words.String()
		}
		if err != nil {
			t.Fatalf("not well-formed: %v", err)
		}
		switch k := k.(type) {
		case xml.StartElement:
			elements = append(elements, k.Copy())
		case xml.CharData:
			words.Write(k)
		}
	}
}

// TestFigures draws every figure of every study at both widths and looks for
// what a reader would stumble over.
func TestFigures(t *testing.T) {
	for _, s := range studies() {
		v := newView(s.Study)
		for _, entry := range figureTable {
			for _, width := range []float64{wide, narrow} {
				for _, f := range drawFigure(v, entry.id, width) {
					if f.W != width || !(f.H > 20) || width == wide && f.H > 1250 { // a printed page is 1.4 times as high as wide
						t.Errorf("%s, %s: %v x %v", s.name, f.ID, f.W, f.H)
					}
					checkWords(t, s.name, f)
					checkSVG(t, s.name, f)
				}
			}
		}
	}
}

// checkWords fails when words overlap or leave the figure.
func checkWords(t *testing.T, name string, f *draw.Figure) {
	t.Helper()
	words := f.Words()
	for i, a := range words {
		b := a.Box()
		if b.X0 < -1 || b.Y0 < -1 || b.X1 > f.W+1 || b.Y1 > f.H+1 {
			t.Errorf("%s, %s at %v: %q leaves the figure: %+v", name, f.ID, f.W, a.S, b)
		}
		for _, c := range words[:i] {
			if o := b.Overlap(c.Box()); o > 1 {
				t.Errorf("%s, %s at %v: %q and %q overlap by %.1f px", name, f.ID, f.W, a.S, c.S, o)
			}
		}
	}
}

var notNumbers = regexp.MustCompile(`NaN|[+-]Inf`)

func checkSVG(t *testing.T, name string, f *draw.Figure) {
	t.Helper()
	var b bytes.Buffer
	if err := f.WriteFile(&b); err != nil {
		t.Fatal(err)
	}
	elements, _ := tokens(t, b.Bytes())
	paths := 0
	for _, e := range elements {
		if e.Name.Local == "path" {
			paths++
		}
		for _, a := range e.Attr {
			if a.Name.Local != "class" && notNumbers.MatchString(a.Value) {
				t.Errorf("%s, %s: %s=%q", name, f.ID, a.Name.Local, a.Value)
			}
			if strings.Contains(a.Value, "://") && a.Name.Local != "xmlns" {
				t.Errorf("%s, %s: address %s", name, f.ID, a.Value)
			}
		}
	}
	if paths < 3 {
		t.Errorf("%s, %s: only %d paths", name, f.ID, paths)
	}
	if f.Title == "" || f.Desc == "" {
		t.Errorf("%s, %s: no title or description", name, f.ID)
	}
}

// TestFiguresThere says which figures a usual study has, and that an empty one
// has none.
func TestFiguresThere(t *testing.T) {
	usual, grid := newView(invented()), newView(gridStudy())
	for _, entry := range figureTable {
		v := usual
		if strings.HasPrefix(entry.id, "grid") {
			v = grid
		}
		if len(drawFigure(v, entry.id, wide)) == 0 {
			t.Errorf("the study has no figure %s", entry.id)
		}
		if n := len(drawFigure(newView(studies()[1].Study), entry.id, wide)); n != 0 {
			t.Errorf("the empty study has %d figures %s", n, entry.id)
		}
	}
	if n := len(drawFigure(newView(manyArms(40)), "margin-rail", wide)); n != 2 {
		t.Errorf("forty arms on %d rails, want 2", n)
	}
}

// TestEveryArmNamed looks for each arm's name in each figure, whole or
// shortened with the whole name as its title.
func TestEveryArmNamed(t *testing.T) {
	s := invented()
	v := newView(s)
	for _, entry := range figureTable {
		if slices.ContainsFunc(keptKinds, func(k keptKind) bool { return k.id == entry.id }) || entry.id == "signal-map" { // of diagnosed runs only
			continue
		}
		if slices.Contains([]string{"contrast-rail", "range-map", "range-by-epoch", "exponents", "grids", "grid-bits", "stochastic-beside-nearest"}, entry.id) { // of some arms only
			continue
		}
		for _, width := range []float64{wide, narrow} {
			var b bytes.Buffer
			for _, f := range drawFigure(v, entry.id, width) {
				if err := f.WriteInline(&b, f.ID); err != nil {
					t.Fatal(err)
				}
			}
			_, text := tokens(t, []byte("<all>"+b.String()+"</all>"))
			text = strings.Join(strings.Fields(text), "")
			for _, a := range v.others() {
				if !strings.Contains(text, strings.Join(strings.Fields(a.Label()), "")) {
					t.Errorf("%s at %v does not name %q", entry.id, width, a.Label())
				}
			}
		}
	}
}

// TestPNGs writes one PNG a figure and looks for more than one colour.
func TestPNGs(t *testing.T) {
	for _, f := range Figures(invented()) {
		var b bytes.Buffer
		if err := f.WritePNG(&b, 1); err != nil {
			t.Fatal(err)
		}
		im, err := png.Decode(&b)
		if err != nil {
			t.Fatal(err)
		}
		seen := map[[3]uint32]int{}
		for y := range im.Bounds().Dy() {
			for x := range im.Bounds().Dx() {
				r, g, b, _ := im.At(x, y).RGBA()
				seen[[3]uint32{r, g, b}]++
			}
		}
		if len(seen) < 20 { // ground, ink and what smoothing makes of their edges
			t.Errorf("%s: %d colours", f.ID, len(seen))
		}
	}
}

// TestRailPlaces reads the rail's places back: the margin's post left of zero,
// a better mean further right, every replicate with a stroke.
func TestRailPlaces(t *testing.T) {
	v := newView(invented())
	d := railDomain(v, v.Comparisons)
	s := d.scale(d.fold(), 0, 1000)
	if d.fold() != 1 {
		t.Errorf("folds at %v pp, want two margins of 0.5", d.fold())
	}
	if !(s.At(-70.76) > 0 && s.At(-70.76) < s.At(-7.74) && s.At(-7.74) < s.At(-0.5) && s.At(-0.5) < s.At(0) && s.At(0) < s.At(0.14)) {
		t.Error("the order on the rail is not that of the values")
	}
	if got, want := s.At(0)-s.At(-0.5), s.At(0.5)-s.At(0); got-want > 1e-9 || want-got > 1e-9 {
		t.Errorf("the linear part is not linear: %v, %v", got, want)
	}
	var b bytes.Buffer
	if err := drawFigure(v, "margin-rail", wide)[0].WriteInline(&b, "x"); err != nil {
		t.Fatal(err)
	}
	if n := strings.Count(b.String(), "<title>replicate 10"); n != 6*inventedReplicates {
		t.Errorf("%d strokes of replicates", n)
	}
}
