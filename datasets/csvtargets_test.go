package datasets

import (
	"errors"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// sensors is a table with two targets among its columns.
const sensors = "speed,wear,load,heat\n1,0.5,10,20\n2,0.25,20,30\n3,0.75,30,40\n4,1,40,50\n"

func loadSensors(t *testing.T, files map[string]string, values map[string]any) (*Data, error) {
	t.Helper()
	content := map[string][]byte{}
	for name, text := range files {
		content[name] = []byte(text)
	}
	s, err := New("csv", Options{Folder: writeFiles(t, content), Values: values})
	if err != nil {
		return nil, err
	}
	return s.Load(0)
}

// TestCSVTargets: targets in the order asked for, by name and by number, as they are.
func TestCSVTargets(t *testing.T) {
	d, err := loadSensors(t, map[string]string{"a.csv": sensors}, map[string]any{
		"file": "a.csv", "targets": []any{"heat", "wear"}, "validation": 1, "scale": "none",
	})
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(d.TargetNames, []string{"heat", "wear"}) || !slices.Equal(d.Train.Targets.Float32s(), []float32{20, 0.5, 30, 0.25, 40, 0.75}) ||
		!slices.Equal(d.Train.Inputs.Float32s(), []float32{1, 10, 2, 20, 3, 30}) || d.Validation.Len() != 1 || d.Classes != 0 || d.Train.Labels != nil {
		t.Errorf("%+v", d)
	}
	if !strings.Contains(d.Description, "3 training, 1 validation, 0 test rows of 2 features, targets heat, wear") {
		t.Errorf("description %q", d.Description)
	}
	_, rows, _ := strings.Cut(sensors, "\n")
	n, err := loadSensors(t, map[string]string{"a.csv": rows}, map[string]any{
		"file": "a.csv", "targets": []any{int64(4), int64(2)}, "header": false, "validation": 1, "scale": "none",
	})
	if err != nil || n.Hash != d.Hash || !slices.Equal(n.TargetNames, []string{"column 4", "column 2"}) {
		t.Errorf("by number: %v, %v", n, err)
	}
}

// TestCSVFiles: several files are one table, whether with targets or with labels; a
// test file stays one of its own.
func TestCSVFiles(t *testing.T) {
	half := "speed,wear,load,heat\n3,0.75,30,40\n4,1,40,50\n"
	whole, err := loadSensors(t, map[string]string{"a.csv": sensors, "t.csv": half}, map[string]any{"file": "a.csv", "test_file": "t.csv", "targets": []any{"heat"}})
	if err != nil {
		t.Fatal(err)
	}
	parts, err := loadSensors(t, map[string]string{"a.csv": "speed,wear,load,heat\n1,0.5,10,20\n2,0.25,20,30\n", "b.csv": half, "t.csv": half},
		map[string]any{"files": []any{"a.csv", "b.csv"}, "test_file": "t.csv", "targets": []any{"heat"}})
	if err != nil || parts.Hash != whole.Hash || !strings.Contains(parts.Description, "CSV file a.csv and 1 more: 4 training") {
		t.Errorf("in parts: %v, %v", parts, err)
	}
	labels, err := loadSensors(t, map[string]string{"a.csv": "x,kind\n1,b\n2,a\n", "b.csv": "x,kind\n3,c\n4,b\n"}, map[string]any{"files": []any{"a.csv", "b.csv"}, "label": "kind"})
	if err != nil || !slices.Equal(labels.Train.Labels, []int32{1, 0, 2, 1}) || !slices.Equal(labels.ClassNames, []string{"a", "b", "c"}) {
		t.Errorf("labels: %+v, %v", labels, err)
	}
}

// TestCSVTargetErrors: file, line and column of what is wrong.
func TestCSVTargetErrors(t *testing.T) {
	good := map[string]any{"files": []any{"a.csv", "b.csv"}, "targets": []any{"heat"}}
	for _, c := range []struct {
		second string // the file b.csv
		want   string
		line   int
		column int
	}{
		{"speed,wear,load,heat\n1,2,3,x\n", `"x" of "heat" is no number`, 2, 4},
		{"speed,wear,load,heat\n1,2,3,4\n1,2,3,\n", "the field is empty", 3, 4},
		{"speed,wear,load,heat\n1,2,3,NaN\n", "is not a finite number", 2, 4},
		{"speed,wear,heat\n1,2,3\n", "2 features, but", 1, 0},
		{"speed,load,wear,heat\n1,2,3,4\n", `feature 2 is called "load"`, 1, 2},
		{"speed,wear,load\n1,2,3\n", `no column is called "heat"`, 1, 0},
		{"speed,wear,load,heat\n", "there are no rows of data", 0, 0},
		{"", "there are no rows of data", 0, 0},
		{"speed,wear,load,heat\n1,2,3,1e60\n", "beyond binary32", 2, 0},
	} {
		_, err := loadSensors(t, map[string]string{"a.csv": sensors, "b.csv": c.second}, good)
		var file *FileError
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "b.csv") || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: %v, want %s", c.second, err, c.want)
		} else if errors.As(err, &file) && (file.Line != c.line || file.Column != c.column || filepath.Base(file.File) != "b.csv") {
			t.Errorf("%q: %s line %d column %d, want b.csv, %d, %d", c.second, file.File, file.Line, file.Column, c.line, c.column)
		}
	}
	for key, values := range map[string]map[string]any{
		"label":   {"file": "a.csv", "targets": []any{"heat"}, "label": "wear"},
		"classes": {"file": "a.csv", "targets": []any{"heat"}, "classes": []any{"a", "b"}},
		"ignore":  {"file": "a.csv", "targets": []any{"heat"}, "ignore": []any{"heat"}},
		"files":   {"file": "a.csv", "files": []any{"a.csv"}, "targets": []any{"heat"}},
		"file":    {"targets": []any{"heat"}},
		"targets": {"file": "a.csv", "targets": []any{"heat", "heat"}},
	} {
		_, err := loadSensors(t, map[string]string{"a.csv": sensors}, values)
		wantOptionError(t, err, key)
	}
	for _, bad := range []any{"heat", []any{}, []any{int64(0)}, []any{"heat", int64(2)}, []any{true}, []any{int64(2), int64(2)}, 7} {
		_, err := loadSensors(t, map[string]string{"a.csv": sensors}, map[string]any{"file": "a.csv", "targets": bad})
		wantOptionError(t, err, "targets")
	}
	_, err := loadSensors(t, map[string]string{"a.csv": sensors}, map[string]any{"files": []any{}, "targets": []any{"heat"}})
	wantOptionError(t, err, "files")
	_, err = loadSensors(t, map[string]string{"a.csv": sensors}, map[string]any{"file": "a.csv", "header": false, "targets": []any{"heat"}})
	wantOptionError(t, err, "targets")
}
