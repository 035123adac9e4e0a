package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"ulpine/results"
)

func sheetOf(t *testing.T, s *results.Study, name string) []map[string]string {
	t.Helper()
	var b bytes.Buffer
	if err := Sheet(&b, s, name); err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(&b).ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	var out []map[string]string
	for _, r := range rows[1:] {
		m := map[string]string{}
		for i, h := range rows[0] {
			m[h] = r[i]
		}
		out = append(out, m)
	}
	return out
}

// same compares bits, NaN being equal to NaN.
func same(t *testing.T, what, cell string, want float64) {
	t.Helper()
	got, err := strconv.ParseFloat(cell, 64)
	if err != nil || got != want && !(math.IsNaN(got) && math.IsNaN(want)) {
		t.Errorf("%s: %q, want %v (%v)", what, cell, want, err)
	}
}

// TestSheetsReadBack: what is written reads back to the same bits.
func TestSheetsReadBack(t *testing.T) {
	for _, st := range studies() {
		s := st.Study
		for i, m := range sheetOf(t, s, "comparisons")[:len(s.Comparisons)] {
			c := &s.Comparisons[i]
			for key, want := range map[string]float64{"margin": c.Margin, "mean": c.Mean, "sd": c.SD, "low": c.Low, "high": c.High, "boot_low": c.BootLow, "p": c.P, "holm": c.Holm} {
				same(t, st.name+" "+c.Arm+" "+key, m[key], want)
			}
			if m["verdict"] != verdictWords(c.Verdict) || m["n"] != strconv.Itoa(c.N) {
				t.Errorf("%s: %v", c.Arm, m)
			}
		}
		k := 0
		epochs := sheetOf(t, s, "epochs")
		for i := range s.Runs {
			for _, e := range s.Runs[i].Epochs {
				m := epochs[k]
				k++
				same(t, "training loss", m["training_loss"], e.TrainLoss)
				same(t, "validation loss", m["validation_loss"], e.ValidationLoss)
				same(t, "test metric", m["test_metric"], e.TestMetric)
				training, validation, test := e.RMSE()
				same(t, "training RMSE", m["training_rmse"], training)
				same(t, "validation RMSE", m["validation_rmse"], validation)
				same(t, "test RMSE", m["test_rmse"], test)
				if m["arm"] != s.Runs[i].Arm {
					t.Fatalf("epoch %d is of %s", k, m["arm"])
				}
			}
		}
		if k != len(epochs) {
			t.Errorf("%d epochs too many", len(epochs)-k)
		}
		for _, name := range SheetNames() {
			sheetOf(t, s, name)
		}
	}
	if err := Sheet(&bytes.Buffer{}, invented(), "nothing"); err == nil {
		t.Error("a sheet that does not exist is written")
	}
}

func TestSheetCounts(t *testing.T) {
	s := invented()
	sum := uint64(0)
	for _, r := range s.Runs {
		for _, x := range r.Confusion {
			sum += x
		}
	}
	got := uint64(0)
	for _, m := range sheetOf(t, s, "confusion") {
		n, err := strconv.ParseUint(m["count"], 10, 64)
		if err != nil {
			t.Fatal(err)
		}
		got += n
	}
	if got != sum || sum != 70*inventedClasses*400 {
		t.Errorf("%d examples, the runs hold %d", got, sum)
	}
	if n := len(sheetOf(t, s, "differences")); n != 7*inventedReplicates {
		t.Errorf("%d differences", n)
	}
}

// TestJSON reads the numbers back: null has a flag, and nothing else has.
func TestJSON(t *testing.T) {
	for _, st := range studies() {
		var b bytes.Buffer
		if err := JSON(&b, st.Study); err != nil {
			t.Fatalf("%s: %v", st.name, err)
		}
		var top map[string]any
		if err := json.Unmarshal(b.Bytes(), &top); err != nil {
			t.Fatalf("%s: %v", st.name, err)
		}
		checkFlags(t, st.name, top)
		cs := top["comparisons"].([]any)
		if len(cs) != len(st.Comparisons) {
			t.Fatalf("%s: %d comparisons", st.name, len(cs))
		}
		for i, c := range cs {
			want := st.Comparisons[i].Mean
			got, there := c.(map[string]any)["mean"].(float64)
			if there == math.IsNaN(want) || there && got != want {
				t.Errorf("%s: mean %v, want %v", st.name, c.(map[string]any)["mean"], want)
			}
		}
	}
}

// checkFlags walks an object: every flag belongs to a null, every number that is
// null has a flag. Only dates may be null without.
func checkFlags(t *testing.T, name string, o map[string]any) {
	t.Helper()
	flags, _ := o["not_finite"].(map[string]any)
	nulls := 0
	for key, v := range o {
		switch v := v.(type) {
		case nil:
			if flags[key] == nil && key != "started" && key != "written" && key != "margin_fixed" {
				t.Errorf("%s: %s is null without a flag", name, key)
			}
			if flags[key] != nil {
				nulls++
			}
		case map[string]any:
			if key != "not_finite" {
				checkFlags(t, name, v)
			}
		case []any:
			for i, x := range v {
				if m, ok := x.(map[string]any); ok {
					checkFlags(t, name, m)
				}
				if x == nil {
					nulls++
					if flags[key+"["+strconv.Itoa(i)+"]"] == nil {
						t.Errorf("%s: %s[%d] is null without a flag", name, key, i)
					}
				}
			}
		}
	}
	if nulls != len(flags) {
		t.Errorf("%s: %d flags for %d nulls: %v", name, len(flags), nulls, flags)
	}
	for _, f := range flags {
		if f != "NaN" && f != "+Inf" && f != "-Inf" {
			t.Errorf("%s: flag %v", name, f)
		}
	}
}

// TestWrite writes a whole report and looks for every file.
func TestWrite(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "a", "report")
	s := invented()
	before := fmt.Sprintf("%+v", *s)
	if err := Write(dir, s); err != nil {
		t.Fatal(err)
	}
	if fmt.Sprintf("%+v", *s) != before {
		t.Error("writing a report alters the study")
	}
	want := []string{PageName, MarkdownName, "numbers/numbers.json"}
	for _, n := range SheetNames() {
		want = append(want, "numbers/"+n+".csv")
	}
	for _, f := range figureTable {
		if len(drawFigure(newView(s), f.id, wide)) == 0 {
			continue
		}
		want = append(want, "figures/"+f.id+".svg", "figures/"+f.id+".png")
	}
	for _, name := range want {
		b, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil || len(b) < 20 {
			t.Errorf("%s: %d bytes, %v", name, len(b), err)
		}
	}
	err := filepath.WalkDir(dir, func(path string, _ os.DirEntry, err error) error {
		if strings.HasSuffix(path, ".part") {
			t.Errorf("%s was left behind", path)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if got, err := os.ReadFile(filepath.Join(dir, PageName)); err != nil || string(got) != pageOf(t, s) {
		t.Errorf("the page in the directory is another one (%v)", err)
	}
}

func TestWriteTellsErrors(t *testing.T) {
	dir := t.TempDir()
	blocked := filepath.Join(dir, "file")
	if err := os.WriteFile(blocked, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	err := Write(filepath.Join(blocked, "report"), &results.Study{})
	if err == nil || !strings.Contains(err.Error(), blocked) {
		t.Errorf("a report below a file: %v", err)
	}
}
