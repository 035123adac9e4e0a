package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// TestKeptMaps: the worst point of a layer counts, of updates that of most samples;
// layers that lost nothing are left out; what is no number is the worst.
func TestKeptMaps(t *testing.T) {
	s := &results.Study{Arms: []results.Arm{{Name: "a", Slug: "a"}}, Diagnoses: []results.Diagnosis{{Arm: "a", Replicate: 7}}}
	add := func(kind results.QualityKind, layer int, at string, epoch int, n uint64, value float64) {
		d := &s.Diagnoses[0]
		d.Qualities = append(d.Qualities, results.Quality{Kind: kind, Layer: layer, Name: "dense 5", At: at, Epoch: epoch, Count: n, Value: value})
	}
	add(results.SignalToNoise, 2, "forward.weight", 1, 9, 40)
	add(results.SignalToNoise, 2, "update.step", 1, 9, 12)
	add(results.SignalToNoise, 2, "update.step", 3, 9, math.Inf(1))
	add(results.SignalToNoise, 1, "forward.activation", 1, 9, math.Inf(1))
	add(results.UpdatesKept, 2, "weight", 1, 100, 0.9)
	add(results.UpdatesKept, 2, "bias", 1, 5, 0)
	add(results.UpdatesStill, 2, "weight", 1, 100, 0.25)
	add(results.GradientCosine, 2, "weight", 1, 0, 0.5)
	add(results.GradientCosine, 2, "bias", 1, 0, math.NaN())
	v := newView(s)
	row := func(i, rows int) *keptRow {
		t.Helper()
		maps := v.keptMaps(&keptKinds[i])
		if len(maps) != 1 || len(maps[0].rows) != rows || maps[0].replicate != 7 {
			t.Fatalf("%s: %+v", keptKinds[i].id, maps)
		}
		return maps[0].rows[0]
	}
	signal := row(0, 1)
	if q := signal.cells[1]; q.Value != 12 || q.At != "update.step" {
		t.Errorf("the noisiest point is %+v", q)
	}
	if q, _ := signal.last(); q.Epoch != 3 {
		t.Errorf("the last epoch is %+v", q)
	}
	if q := signal.worst(&keptKinds[0]); q.Value != 12 {
		t.Errorf("the worst epoch is %+v", q)
	}
	updates := row(2, 1)
	if q := updates.cells[1]; q.At != "weight" || !strings.Contains(updates.notes[1], "25.0 % of weight updates without effect") {
		t.Errorf("updates are %+v, %q", q, updates.notes[1])
	}
	if q := row(4, 1).cells[1]; q.At != "bias" || !math.IsNaN(q.Value) {
		t.Errorf("the gradient is %+v", q)
	}
	if len(v.keptMaps(&keptKinds[1])) != 0 || len(v.keptMaps(&keptKinds[3])) != 0 {
		t.Error("maps of what was not looked at")
	}
}

// TestKeptFills: a cell is the fuller the more was lost, empty of nothing, full of all.
func TestKeptFills(t *testing.T) {
	for i, c := range []struct{ all, some, none float64 }{
		{0, 60, math.Inf(1)},
		{0, 0.999, 1},
		{2, 1.001, 1},
		{-1, -0.001, 0},
		{0, 0.999, 1},
	} {
		k := &keptKinds[i]
		all, some, none := k.lost(c.all), k.lost(c.some), k.lost(c.none)
		if all != 1 || none != 0 || some <= 0 || some >= 1 {
			t.Errorf("%s fills %v, %v, %v", k.id, all, some, none)
		}
	}
	for x, want := range map[float64]string{
		0.5: "0.5000", 1: "1.0000", 1 - 1e-6: "1−1e−06", 1 + 2e-5: "1+2e−05", 2e-5: "2e−05", -3e-4: "−3e−04", 0: "0.0000", math.NaN(): nothingToKeep,
	} {
		if got := ratioWords(x); got != want {
			t.Errorf("%v is spelt %q, want %q", x, got, want)
		}
	}
}

// TestDiagnosticsInNumbers: every figure is in the sheet and in the JSON, a missing
// one as NaN and as null with a flag.
func TestDiagnosticsInNumbers(t *testing.T) {
	s := invented()
	want := 0
	for _, d := range s.Diagnoses {
		want += len(d.Qualities)
	}
	var b bytes.Buffer
	if err := Sheet(&b, s, "diagnostics"); err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(&b).ReadAll()
	if err != nil || len(rows) != 1+want || want == 0 {
		t.Fatalf("%d rows of %d figures, %v", len(rows)-1, want, err)
	}
	b.Reset()
	if err := JSON(&b, s); err != nil {
		t.Fatal(err)
	}
	var top struct {
		Diagnoses []struct {
			Arm       string
			Qualities []struct {
				Kind      string
				Value     *float64
				NotFinite map[string]string `json:"not_finite"`
			}
		}
	}
	if err := json.Unmarshal(b.Bytes(), &top); err != nil {
		t.Fatal(err)
	}
	missing := 0
	for _, d := range top.Diagnoses {
		for _, q := range d.Qualities {
			want--
			if q.Value == nil {
				missing++
				if q.NotFinite["value"] == "" {
					t.Errorf("a missing %s has no flag", q.Kind)
				}
			}
		}
	}
	if want != 0 || missing == 0 {
		t.Errorf("%d figures are not in the JSON, %d are missing", want, missing)
	}
}

// TestBrief: the four questions are answered of the leanest arm within the margin.
func TestBrief(t *testing.T) {
	s := invented()
	facts := newView(s).brief()
	if len(facts) != 4 {
		t.Fatalf("%d facts", len(facts))
	}
	for i, want := range [][]string{
		{"1 bf16 stochastic update: 16.0 bits", "the baseline 32.0"},
		{"stochastic r=16 truncated at update.state, update.step, update.master", "nearest-even at the other", "Rounded to nearest instead (2 bf16 nearest): −", "worse than margin"},
		{"95 % interval [", "10 pairs", "the margin is −0.5", "Holm-corrected for 6 comparisons"},
		{"50 % of the memory", "50 % of the bytes moved", "44 to 40 % of the energy"},
	} {
		for _, w := range want {
			if !strings.Contains(facts[i].Text, w) {
				t.Errorf("%s: %q lacks %q", facts[i].Head, facts[i].Text, w)
			}
		}
	}
	page := pageOf(t, s)
	if at := strings.Index(page, "Fewest bits"); at < 0 || at > strings.Index(page, `class="contents"`) {
		t.Error("the brief does not stand before the contents")
	}
	for i := range s.Comparisons {
		s.Comparisons[i].Verdict.Kind = results.Undecided
	}
	if facts := newView(s).brief(); len(facts) != 2 || facts[0].Head != "Closest" || !strings.HasPrefix(facts[0].Text, "1 bf16 stochastic update, 16.0 bits a stored value: undecided") {
		t.Errorf("no arm is within the margin, and the brief says %q", facts)
	}
	for i := range s.Comparisons {
		s.Comparisons[i].Verdict.Kind = results.Worse
	}
	if newView(s).brief() != nil {
		t.Error("a brief although every arm is worse than the margin")
	}
}
