package report

import (
	"cmp"
	"fmt"
	"html/template"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// keptKind is one way of asking what arithmetic kept: a figure of small maps, an
// arm a map, its layers down and its epochs across.
type keptKind struct {
	id, title string // of the figure; the title names it on the page's switch
	caption   string
	kinds     []results.QualityKind // the first one fills the cells, the others stand in their titles
	worse     func(a, b float64) bool
	lost      func(x float64) float64 // how far a cell fills, 0: kept all, to 1
	spell     func(x float64) string
	largest   bool // of the tensors of a layer, that with most samples counts
}

// quietest is the signal to noise, in decibels, from which a cell is empty: that
// of binary32, whose rounding to nearest leaves about 2^-26 of a value's size as
// root mean square (6.02 dB a bit).
const quietest = 150.0

// keptKinds are the figures, in the order of the page.
var keptKinds = []keptKind{
	{
		"kept-signal", "Signal to rounding noise",
		"Power of the values at a rounding point over that of their rounding errors, in decibels: about 6 dB for a bit of fraction. A cell is that of the layer's noisiest point; it is empty from 150 dB, which is binary32's, and full at 0 dB. Layers that rounded nothing off are left out.",
		[]results.QualityKind{results.SignalToNoise},
		func(a, b float64) bool { return a < b },
		func(x float64) float64 { return math.Max(0, math.Min(1, 1-x/quietest)) },
		decibelWords, false,
	},
	{
		"kept-sums", "Sums kept",
		"Computed sums against the exact sums of the same terms: 1 is all, 0 nothing. A cell is that of the layer's sum that is furthest from 1, and fills with its distance, logarithmically from one in ten million.",
		[]results.QualityKind{results.SumsKept},
		furtherFromOne, fromOne, ratioWords, false,
	},
	{
		"kept-updates", "Updates kept",
		"What masters moved by against the steps they were to take: 1 is all, 0 nothing, more than 1 too much; stochastic rounding keeps 1 on average, and few samples scatter around it. A cell is that of the layer's weights and fills as for sums. Pointed at, it also says how many updates had no effect at all.",
		[]results.QualityKind{results.UpdatesKept, results.UpdatesStill},
		furtherFromOne, fromOne, ratioWords, true,
	},
	{
		"update-bias", "Update bias",
		"By how much updates came out too large (+) or too small (−) on average, as a share of the mean size of what was intended: rounding that pulls one way. A cell is that of the layer's weights and fills with its size, logarithmically from one in ten million.",
		[]results.QualityKind{results.UpdateBias},
		func(a, b float64) bool { return math.Abs(a) > math.Abs(b) },
		func(x float64) float64 { return fullness(math.Abs(x)) },
		func(x float64) string {
			if x > 0 {
				return "+" + ratioWords(x)
			}
			return ratioWords(x)
		}, true,
	},
	{
		"gradient-direction", "Gradient direction",
		"Cosine of the angle between a parameter's gradient and the one of binary64 arithmetic on the same masters and batch: 1 is the same direction. A cell is the least of the layer's parameters, and fills with what is missing to 1, logarithmically from one in ten million.",
		[]results.QualityKind{results.GradientCosine},
		func(a, b float64) bool { return a < b }, fromOne, ratioWords, false,
	},
}

func furtherFromOne(a, b float64) bool { return math.Abs(1-a) > math.Abs(1-b) }
func fromOne(x float64) float64        { return fullness(math.Abs(1 - x)) }

// decibelWords spells a ratio of powers.
func decibelWords(x float64) string {
	switch {
	case math.IsInf(x, 1):
		return "exact"
	case math.IsNaN(x):
		return "no number"
	}
	return fixed(x, 0) + " dB"
}

// nothingToKeep is said of a ratio 0/0: the sums or gradients looked at in an epoch
// were all zero, as behind a ReLU that lets nothing through, or none was finite. The
// section's lead explains it.
const nothingToKeep = "–"

// ratioWords spells a share or a cosine; close to one, by what is missing.
func ratioWords(x float64) string {
	d := 1 - x
	switch {
	case math.IsNaN(x) || math.IsInf(x, 0):
		return nothingToKeep
	case d != 0 && math.Abs(d) < 5e-5:
		sign := "−"
		if d < 0 {
			sign = "+"
		}
		return "1" + sign + minus(fmt.Sprintf("%.0e", math.Abs(d)))
	case x != 0 && math.Abs(x) < 1e-3:
		return minus(fmt.Sprintf("%.0e", x))
	}
	return fixed(x, 4)
}

// keptRow is one layer of a map with the worst figure of each epoch.
type keptRow struct {
	layer int
	name  string
	cells map[int]results.Quality
	notes map[int]string // further kinds, in words
}

// keptMap is the map of one diagnosed run.
type keptMap struct {
	arm       *armView
	replicate uint64
	rows      []*keptRow
}

// keptMaps are the maps of one kind, a diagnosed run each; runs without a figure
// of that kind have none.
func (v *view) keptMaps(k *keptKind) []keptMap {
	var out []keptMap
	for i := range v.Diagnoses {
		d := &v.Diagnoses[i]
		at := slices.IndexFunc(v.arms, func(a *armView) bool { return a.Slug == d.Arm })
		if at < 0 {
			continue
		}
		m := keptMap{arm: v.arms[at], replicate: d.Replicate}
		for _, q := range d.Qualities {
			if q.Epoch > 0 && slices.Contains(k.kinds, q.Kind) {
				m.row(q).take(k, q)
			}
		}
		m.rows = slices.DeleteFunc(m.rows, (*keptRow).exact)
		slices.SortStableFunc(m.rows, func(a, b *keptRow) int { return cmp.Compare(a.layer, b.layer) })
		if len(m.rows) > 0 {
			out = append(out, m)
		}
	}
	return out
}

// row is that of the quality's layer; input and loss have one each.
func (m *keptMap) row(q results.Quality) *keptRow {
	name := layerName(q.Layer, q.Name)
	for _, r := range m.rows {
		if r.layer == q.Layer && (q.Layer >= 0 || r.name == name) {
			return r
		}
	}
	r := &keptRow{layer: q.Layer, name: name, cells: map[int]results.Quality{}, notes: map[int]string{}}
	m.rows = append(m.rows, r)
	return r
}

// take keeps the worst figure of an epoch; one that is no number is the worst, but of
// sums gives way to any other: sums that are all zero say nothing. Of updates it keeps that of the tensor of which most was looked at, the weights: a
// bias has too few values to tell anything.
func (r *keptRow) take(k *keptKind, q results.Quality) {
	if q.Kind != k.kinds[0] {
		r.notes[q.Epoch] = strings.TrimPrefix(r.notes[q.Epoch]+fmt.Sprintf(", %s of %s %s", percentage3(q.Value), plain(q.At), q.Kind), ", ")
		return
	}
	old, known := r.cells[q.Epoch]
	if known && k.largest && q.Count != old.Count {
		if q.Count > old.Count {
			r.cells[q.Epoch] = q
		}
		return
	}
	worst := math.IsNaN(q.Value) && !math.IsNaN(old.Value) || k.worse(q.Value, old.Value)
	if q.Kind == results.SumsKept {
		worst = !math.IsNaN(q.Value) && (math.IsNaN(old.Value) || k.worse(q.Value, old.Value))
	}
	if !known || worst {
		r.cells[q.Epoch] = q
	}
}

// exact reports whether nothing was ever rounded off, as in a ReLU.
func (r *keptRow) exact() bool {
	for _, q := range r.cells {
		if !math.IsInf(q.Value, 1) {
			return false
		}
	}
	return true
}

// last is the figure of the last epoch that was looked at.
func (r *keptRow) last() (q results.Quality, ok bool) {
	for e, c := range r.cells {
		if !ok || e > q.Epoch {
			q, ok = c, true
		}
	}
	return q, ok
}

// keptFigure draws the maps of kind i.
func keptFigure(i int) func(v *view, width float64) []*draw.Figure {
	return func(v *view, width float64) []*draw.Figure {
		k := &keptKinds[i]
		maps := v.keptMaps(k)
		epochs := v.clock.epochs
		for _, m := range maps {
			for _, r := range m.rows {
				for e := range r.cells {
					epochs = max(epochs, e)
				}
			}
		}
		var out []*draw.Figure
		for from := 0; from < len(maps); from += panelsPerFigure {
			out = append(out, k.draw(maps[from:min(from+panelsPerFigure, len(maps))], epochs, width))
		}
		return out
	}
}

// Sizes of a map, pixels.
const (
	keptPitch = 17.0 // from one layer to the next
	keptHead  = 24.0 // the arm's name
	keptFoot  = 34.0 // the epochs
	keptNames = 74.0 // the layers' names
	keptWords = 58.0 // the last figures
)

// draw lays maps out in three columns, or one below the other.
func (k *keptKind) draw(maps []keptMap, epochs int, width float64) *draw.Figure {
	columns := 3
	if width < 600 {
		columns = 1
	}
	f := &draw.Figure{Title: k.title, W: width}
	room := width / float64(columns)
	var said []string
	for from := 0; from < len(maps); from += columns {
		most := 0
		for i, m := range maps[from:min(from+columns, len(maps))] {
			said = append(said, k.one(&f.Group, room*float64(i), f.H, room-12, m, epochs))
			most = max(most, len(m.rows))
		}
		f.H += keptHead + keptPitch*float64(most) + keptFoot
	}
	f.Desc = strings.Join(said, " ")
	return f
}

// one draws a map and returns it in words.
func (k *keptKind) one(g *draw.Group, x, y, width float64, m keptMap, epochs int) string {
	g = g.Sub("arm", draw.Attr{Name: "arm", Value: m.arm.Slug})
	g.Text(x, y+13, m.arm.Label(), draw.Type{Size: 11, Bold: true, Max: width})
	x0, x1 := x+keptNames, x+width-keptWords
	cell := math.Min(26, (x1-x0)/float64(max(1, epochs)))
	top := y + keptHead
	said := fmt.Sprintf("%s, replicate %d:", m.arm.Label(), m.replicate)
	for _, r := range m.rows {
		g.Text(x0-6, top+11, shortLayer(r), draw.Type{Size: 10, Anchor: draw.End, Role: draw.Soft, Max: keptNames - 6})
		for e := 1; e <= epochs; e++ {
			if q, ok := r.cells[e]; ok {
				k.cell(g, x0+cell*float64(e-1), top, cell, q, r)
			}
		}
		if q, ok := r.last(); ok {
			g.Text(x0+cell*float64(epochs)+5, top+11, k.spell(q.Value), draw.Type{Size: 10, Max: keptWords})
			said += fmt.Sprintf(" %s %s at %s in epoch %d,", r.name, k.spell(q.Value), plain(q.At), q.Epoch)
		}
		top += keptPitch
	}
	last := math.Inf(-1)
	for e := 1; e <= epochs; e++ {
		words := fmt.Sprint(e)
		at, w := x0+cell*(float64(e)-0.5), draw.Width(words, 9.5, false)
		if at-w/2 > last+5 {
			g.Text(at, top+10, words, draw.Type{Size: 9.5, Anchor: draw.Middle, Role: draw.Soft})
			last = at + w/2
		}
	}
	return strings.TrimSuffix(said, ",") + "."
}

// cell draws one epoch of a layer, filled from below with what was lost; one that
// holds no number is crossed out.
func (k *keptKind) cell(g *draw.Group, x, y, pitch float64, q results.Quality, r *keptRow) {
	w, h := math.Max(1.5, pitch-math.Min(1.5, pitch/4)), keptPitch-2.5
	words := fmt.Sprintf("%s, epoch %d: %s at %s", r.name, q.Epoch, k.spell(q.Value), plain(q.At))
	if n := r.notes[q.Epoch]; n != "" {
		words += "; " + n
	}
	t := g.Titled(words)
	if math.IsNaN(q.Value) {
		t.Line(x, y+h, x+w, y, draw.Line(draw.Post, 1.4))
	} else if full := k.lost(q.Value); full > 0 {
		high := math.Max(1.5, h*full)
		t.Rect(x, y+h-high, w, high, draw.Fill(draw.Fraction))
	}
	t.Rect(x, y, w, h, draw.Line(draw.Faint, 1))
}

// shortLayer is a layer's number and kind, "1 conv1d".
func shortLayer(r *keptRow) string {
	words := strings.Fields(r.name)
	return strings.Join(words[:min(len(words), 1+min(r.layer+1, 1))], " ")
}

// keptPart is one figure of the section with its switch's words.
type keptPart struct {
	ID, Title string
	Figure    template.HTML
}

// keptSection is left out where no run was looked at.
func keptSection(v *view) any {
	data := struct {
		Lead  string
		Parts []keptPart
		Table *tabular
	}{
		Lead: "From samples of one run of each arm, the baseline included: a map an arm, its layers down, its epochs across. The fuller a cell, the more was lost; the figure at a row's end is that of the last epoch looked at. " +
			"Epochs that were not looked at have no cell. Samples are small: one may hold only values that a format has exactly, and what stochastic rounding keeps of updates " +
			"scatters about 1 from epoch to epoch by design. A dash stands for a ratio of which nothing can be told: all that was looked at was zero, or none of it finite.",
		Table: v.keptTable(),
	}
	for i := range keptKinds {
		k := &keptKinds[i]
		if f := figureHTML(v, k.id, k.title+". "+k.caption, false); f != "" {
			data.Parts = append(data.Parts, keptPart{k.id, k.title, f})
		}
		if i == 0 {
			caption := "Signal to rounding noise in decibels, point by point, in the last epoch looked at; pointed at, a cell tells all of them. Layers that rounded nothing off are left out."
			if f := figureHTML(v, "signal-map", caption, false); f != "" {
				data.Parts = append(data.Parts, keptPart{"signal-map", "the same point by point", f})
			}
		}
	}
	if len(data.Parts) == 0 {
		return nil
	}
	return data
}

// keptTable is the worst epoch of every layer; nil when no run was looked at.
func (v *view) keptTable() *tabular {
	t := &tabular{
		Caption: "The worst epoch of each layer, of those looked at",
		Columns: columns("Arm and replicate", "layer", "#signal to noise", "at", "#sums kept", "#updates kept", "#update bias", "#gradient cosine"),
		Notes:   []string{"numbers/diagnostics.csv has every rounding point, parameter and epoch."},
	}
	type key struct {
		arm  *armView
		name string
	}
	rows := map[key][]string{}
	var order []key
	for i := range keptKinds {
		k := &keptKinds[i]
		for _, m := range v.keptMaps(k) {
			for _, r := range m.rows {
				at := key{m.arm, r.name}
				if rows[at] == nil {
					rows[at] = []string{fmt.Sprintf("%s, %d", m.arm.Label(), m.replicate), r.name, missing, missing, missing, missing, missing, missing}
					order = append(order, at)
				}
				q := r.worst(k)
				column := 2
				if i > 0 {
					column = i + 3
				} else {
					rows[at][3] = plain(q.At)
				}
				rows[at][column] = k.spell(q.Value)
			}
		}
	}
	for _, at := range order {
		t.Rows = append(t.Rows, rows[at])
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// worst is the worst epoch of a row, the first one of equals.
func (r *keptRow) worst(k *keptKind) results.Quality {
	sum := &keptRow{cells: map[int]results.Quality{}}
	epochs := make([]int, 0, len(r.cells))
	for e := range r.cells {
		epochs = append(epochs, e)
	}
	slices.Sort(epochs)
	for _, e := range epochs {
		q := r.cells[e]
		q.Epoch, q.Count = 0, 0 // all in one place, whatever was looked at
		sum.take(k, q)
	}
	return sum.cells[0]
}
