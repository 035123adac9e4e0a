package datasets

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"math/big"
	"slices"
	"strings"
	"testing"
)

// flowers are ten rows of three features, made up.
const flowers = `length,width,kind,height
5.1,3.5,rose,1
4.9,3.0,lily,2
4.7,3.2,rose,3
4.6,3.1,lily,4
5.0,3.6,aster,5
5.4,3.9,rose,6
4.6,3.4,lily,7
5.0,3.4,rose,8
4.4,2.9,aster,9
4.9,3.1,lily,10
`

// csvSource makes a source of one file's text and further keys.
func csvSource(t *testing.T, text string, changes map[string]any) (Source, error) {
	t.Helper()
	dir := writeFiles(t, map[string][]byte{"data.csv": []byte(text)})
	return newWith("csv", dir, map[string]any{"file": "data.csv", "label": "kind"}, changes)
}

func loadCSV(t *testing.T, text string, changes map[string]any) *Data {
	t.Helper()
	s, err := csvSource(t, text, changes)
	if err != nil {
		t.Fatal(err)
	}
	d, err := s.Load(0)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

func TestCSVReads(t *testing.T) {
	d := loadCSV(t, flowers, map[string]any{"scale": "none", "test_every": int64(5)})
	if !slices.Equal(d.ClassNames, []string{"aster", "lily", "rose"}) {
		t.Errorf("classes %q", d.ClassNames)
	}
	if !slices.Equal(d.Train.Labels, []int32{2, 1, 2, 1, 2, 1, 2, 0}) || !slices.Equal(d.Test.Labels, []int32{0, 1}) {
		t.Errorf("labels %v, %v", d.Train.Labels, d.Test.Labels)
	}
	if got := d.Train.Inputs.Float32s()[:6]; !slices.Equal(got, []float32{5.1, 3.5, 1, 4.9, 3.0, 2}) {
		t.Errorf("first rows %v", got)
	}
	if got := d.Test.Inputs.Float32s(); !slices.Equal(got, []float32{5.0, 3.6, 5, 4.9, 3.1, 10}) {
		t.Errorf("test rows %v: not the fifth and the tenth", got)
	}
	if !slices.Equal(d.Shape, []int{3}) || !slices.Equal(d.Train.Inputs.Shape(), []int{8, 3}) {
		t.Errorf("shape %v of %v", d.Shape, d.Train.Inputs.Shape())
	}
}

// TestCSVSpellings: one table in many spellings has one hash.
func TestCSVSpellings(t *testing.T) {
	options := map[string]any{"test_every": int64(5)}
	want := loadCSV(t, flowers, options)
	for name, c := range map[string]struct {
		text    string
		changes map[string]any
	}{
		"windows line ends": {strings.ReplaceAll(flowers, "\n", "\r\n"), nil},
		"byte order mark":   {"\xEF\xBB\xBF" + flowers, nil},
		"spaces":            {strings.ReplaceAll(flowers, ",", " , "), nil},
		"quoted":            {strings.NewReplacer("rose", `"rose"`, "4.9", `"4.9"`).Replace(flowers), nil},
		"semicolons":        {strings.ReplaceAll(flowers, ",", ";"), map[string]any{"delimiter": ";"}},
		"tabs":              {strings.ReplaceAll(flowers, ",", "\t"), map[string]any{"delimiter": "\t"}},
		"no last line end":  {strings.TrimSuffix(flowers, "\n"), nil},
		"blank lines":       {strings.ReplaceAll(flowers, "\n", "\n\n"), nil},
		"gzip":              {string(zip([]byte(flowers))), nil},
		"exponents":         {strings.ReplaceAll(flowers, "5.1", "51e-1"), nil},
		"label by number":   {flowers, map[string]any{"label": int64(3)}},
		"no header":         {flowers[strings.Index(flowers, "\n")+1:], map[string]any{"label": int64(3), "header": false}},
		"classes as sorted": {flowers, map[string]any{"classes": []any{"aster", "lily", "rose"}}},
	} {
		changes := map[string]any{"test_every": int64(5)}
		for k, v := range c.changes {
			changes[k] = v
		}
		if d := loadCSV(t, c.text, changes); d.Hash != want.Hash {
			t.Errorf("%s: another hash", name)
		}
	}
	for name, changes := range map[string]map[string]any{
		"other order of classes": {"classes": []any{"rose", "lily", "aster"}},
		"a column less":          {"ignore": []any{"width"}},
		"other test rows":        {"test_every": int64(4)},
		"not scaled":             {"scale": "none"},
		"fewer rows":             {"train": int64(7)},
	} {
		all := map[string]any{"test_every": int64(5)}
		for k, v := range changes {
			all[k] = v
		}
		if d := loadCSV(t, flowers, all); d.Hash == want.Hash {
			t.Errorf("%s: the same hash", name)
		}
	}
}

// TestCSVStandardised compares with exact rationals: the statistics to within a
// few units, the inputs to the binary32 number nearest to (x - mean)/std.
func TestCSVStandardised(t *testing.T) {
	d := loadCSV(t, flowers, map[string]any{"test_every": int64(5)})
	raw := loadCSV(t, flowers, map[string]any{"test_every": int64(5), "scale": "none"})
	if len(d.Mean) != 3 || raw.Mean != nil {
		t.Fatalf("statistics %v, %v", d.Mean, raw.Mean)
	}
	heights := []int64{1, 2, 3, 4, 6, 7, 8, 9} // the rows that are not the fifth
	sum, squares := new(big.Rat), new(big.Rat)
	for _, h := range heights {
		sum.Add(sum, big.NewRat(h, 8))
		squares.Add(squares, big.NewRat(h*h, 8))
	}
	variance := new(big.Rat).Sub(squares, new(big.Rat).Mul(sum, sum))
	v, _ := variance.Float64()
	mean, _ := sum.Float64()
	if d.Mean[2] != mean || math.Abs(d.Std[2]-math.Sqrt(v)) > 1e-15*math.Sqrt(v) {
		t.Errorf("mean %g, deviation %g, want %g, %g", d.Mean[2], d.Std[2], mean, math.Sqrt(v))
	}
	for i := range d.Test.Inputs.Float32s() {
		x := []float64{5.0, 3.6, 5, 4.9, 3.1, 10}[i]
		if want := float32((x - d.Mean[i%3]) / d.Std[i%3]); d.Test.Inputs.Float32s()[i] != want {
			t.Errorf("test value %d: %g, want %g", i, d.Test.Inputs.Float32s()[i], want)
		}
	}
}

// TestMoments pins the bits of the statistics by the formula's text.
func TestMoments(t *testing.T) {
	values := []float64{0.1, 7, 0.2, 7, 0.4, 7, 1e10, 7}
	m := newMoments(slice(values), len(values), 2)
	mean := (((0+values[0])+values[2])+values[4]+values[6])/4 + 0
	variance := 0.0
	for i := 0; i < 8; i += 2 {
		d := values[i] - mean
		variance = variance + float64(d*d)
	}
	if std := math.Sqrt(variance / 4); m.mean[0] != mean || m.std[0] != std {
		t.Errorf("%g, %g, want %g, %g", m.mean[0], m.std[0], mean, std)
	}
	if m.mean[1] != 7 || m.std[1] != 0 || m.apply(3, 8) != 0 {
		t.Errorf("constant column: %g, %g", m.mean[1], m.std[1])
	}
}

func TestCSVConstantFeature(t *testing.T) {
	text := "a,b,kind\n0.1,1,x\n0.1,2,y\n0.1,3,x\n0.3,4,y\n"
	d := loadCSV(t, text, map[string]any{"test_every": int64(4)})
	for i, v := range append(slices.Clone(d.Train.Inputs.Float32s()), d.Test.Inputs.Float32s()...) {
		if v != v || i%2 == 0 && v != 0 {
			t.Errorf("value %d is %g", i, v)
		}
	}
	if d.Mean[0] != 0.1 || d.Std[0] != 0 || len(d.Warnings) == 0 || !strings.Contains(strings.Join(d.Warnings, "\n"), `feature "a" is constant`) {
		t.Errorf("mean %g, deviation %g, warnings %q", d.Mean[0], d.Std[0], d.Warnings)
	}
}

func TestCSVSplits(t *testing.T) {
	var b strings.Builder
	b.WriteString("n,kind\n")
	for i := 1; i <= 20; i++ {
		fmt.Fprintf(&b, "%d,%d\n", i, i%2)
	}
	text := b.String()
	rows := func(s Set) string {
		if s.Len() == 0 {
			return ""
		}
		return fmt.Sprint(s.Inputs.Float32s())
	}
	for _, c := range []struct {
		changes                 map[string]any
		train, validation, test string
	}{
		{nil, "[1 2 3 4 5 6 7 8 9 10 11 12 13 14 15 16 17 18 19 20]", "", ""},
		{map[string]any{"test_every": 5}, "[1 2 3 4 6 7 8 9 11 12 13 14 16 17 18 19]", "", "[5 10 15 20]"},
		{map[string]any{"test_every": 5, "test": 2, "validation": 3}, "[1 2 3 4 6 7 8 9 11 12 13 14 16]", "[17 18 19]", "[5 10]"},
		{map[string]any{"test_every": 5, "validation_every": 4, "train": 4}, "[1 2 3 6]", "[4 9 14 19]", "[5 10 15 20]"},
		{map[string]any{"test_every": 5, "validation_every": 4, "validation": 2, "train": 6}, "[1 2 3 6 7 8]", "[4 9]", "[5 10 15 20]"},
	} {
		values := map[string]any{"scale": "none"}
		for k, v := range c.changes {
			values[k] = v
		}
		d := loadCSV(t, text, values)
		if rows(d.Train) != c.train || rows(d.Validation) != c.validation || rows(d.Test) != c.test {
			t.Errorf("%v: sets %s, %s, %s", c.changes, rows(d.Train), rows(d.Validation), rows(d.Test))
		}
	}
}

func TestCSVSeveralFiles(t *testing.T) {
	files := map[string][]byte{
		"data.csv": []byte(flowers),
		"test.csv": []byte("kind,length,width,height\nlily,1,2,3\nrose,4,5,6\n"),
		"vali.csv": []byte("length,width,kind,height\n7,8,rose,9\n"),
	}
	dir := writeFiles(t, files)
	keys := map[string]any{"file": "data.csv", "label": "kind", "test_file": "test.csv", "validation_file": "vali.csv", "scale": "none"}
	s, err := newWith("csv", dir, keys, nil)
	if err != nil {
		t.Fatal(err)
	}
	f, err := s.Facts()
	if err != nil || f.Train != 10 || f.Validation != 1 || f.Test != 2 || f.PerReplicate {
		t.Fatalf("facts %+v, error %v", f, err)
	}
	d, err := s.Load(3)
	if err != nil {
		t.Fatal(err)
	}
	if got := d.Test.Inputs.Float32s(); !slices.Equal(got, []float32{1, 2, 3, 4, 5, 6}) {
		t.Errorf("test rows %v", got)
	}
	for name, c := range map[string]struct {
		text  string
		words string
	}{
		"fewer columns": {"kind,length,width\nlily,1,2\n", "2 features"},
		"other names":   {"kind,length,breadth,height\nlily,1,2,3\n", `called "breadth"`},
	} {
		files["test.csv"] = []byte(c.text)
		s, err := newWith("csv", writeFiles(t, files), keys, nil)
		if err != nil {
			t.Fatal(name, err)
		}
		_, err = s.Load(0)
		wantFileError(t, err, "test.csv", -1, c.words, "line 1", "data.csv")
	}
	files["test.csv"] = []byte("length,width,kind,height\n1,2,rose,3\n1,2,tulip,3\n")
	s, _ = newWith("csv", writeFiles(t, files), keys, nil)
	_, err = s.Load(0)
	wantFileError(t, err, "test.csv", -1, "line 3", `"tulip"`, "aster, lily, rose", "classes")
}

func TestCSVNumericClasses(t *testing.T) {
	d := loadCSV(t, "a,kind\n1,10\n2,9\n3,-1\n4,10\n", map[string]any{"scale": "none"})
	if !slices.Equal(d.ClassNames, []string{"-1", "9", "10"}) {
		t.Errorf("classes %q: whole numbers sort by value", d.ClassNames)
	}
	names := []string{"10", "9", "b", "a"}
	if sortLabels(names); !slices.Equal(names, []string{"10", "9", "a", "b"}) {
		t.Errorf("mixed labels sort as %q", names)
	}
	names = []string{"1", "01", "0"}
	if sortLabels(names); !slices.Equal(names, []string{"0", "01", "1"}) {
		t.Errorf("equal numbers sort as %q", names)
	}
}

func TestCSVFileErrors(t *testing.T) {
	row := "1,2,rose,3\n"
	head := "length,width,kind,height\n"
	for _, c := range []struct {
		name, text string
		changes    map[string]any
		words      []string
	}{
		{"ragged", head + row + "1,2,rose\n", nil, []string{"line 3", "3 fields", "4"}},
		{"too long a row", head + row + "1,2,rose,3,4\n", nil, []string{"line 3", "5 fields"}},
		{"not a number", head + row + "1,two,lily,3\n", nil, []string{"line 3, column 2", `"two"`, `"width"`, "no number"}},
		{"nan", head + row + "1,2,lily,NaN\n", nil, []string{"line 3, column 4", `"NaN"`, "not a finite number"}},
		{"infinity", head + row + "-inf,2,lily,3\n", nil, []string{"line 3, column 1", "not a finite number"}},
		{"overflow", head + row + "1e999,2,lily,3\n", nil, []string{"line 3, column 1", "not a finite number"}},
		{"empty field", head + row + "1,,lily,3\n", nil, []string{"line 3, column 2", "empty"}},
		{"empty label", head + row + "1,2, ,3\n", nil, []string{"line 3, column 3", "label is empty"}},
		{"unknown label column", flowers, map[string]any{"label": "species"}, []string{"line 1", `"species"`, "length, width, kind, height"}},
		{"label column beyond", flowers, map[string]any{"label": 5}, []string{"line 1", "no column 5", "4 fields"}},
		{"label name twice", "kind,a,kind\nx,1,y\n", nil, []string{"line 1, column 3", "twice"}},
		{"ignored column unknown", flowers, map[string]any{"ignore": []any{"id"}}, []string{`"id"`, "correct ignore"}},
		{"no features", "kind\nx\ny\n", nil, []string{"no column is left"}},
		{"header only", head, nil, []string{"no rows"}},
		{"empty", "", nil, []string{"no rows"}},
		{"one class", head + row + row, nil, []string{`"rose"`, "two classes"}},
		{"names as data", flowers, map[string]any{"label": 3, "header": false}, []string{"line 1, column 1", "header = true"}},
		{"stray quote", head + row + "1,2\"3,rose,3\n", nil, []string{"line 3", "no valid CSV", "quot"}},
		{"open quote", head + "1,\"2,rose,3\n" + row, nil, []string{"begins in line 2", "no valid CSV"}},
		{"wrong delimiter", strings.ReplaceAll(flowers, ",", ";"), nil, []string{"line 1", `no column is called "kind"`}},
		{"class not given", flowers, map[string]any{"classes": []any{"rose", "lily"}}, []string{"line 6", `"aster"`, "rose, lily"}},
		{"binary", head + "\x00\x01\xFF,2,rose,3\n", nil, []string{"line 2, column 1", "no number"}},
		{"long line", head + strings.Repeat("x", maxLine+5000) + "\n", nil, []string{"longer than"}},
		{"a value a class", manyLabels(), nil, []string{"more than 1000 different"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			s, err := csvSource(t, c.text, c.changes)
			if err != nil {
				t.Fatal(err)
			}
			_, err = s.Load(0)
			var e *FileError
			if !errors.As(err, &e) {
				t.Fatalf("error %v, want a *FileError", err)
			}
			wantFileError(t, err, "data.csv", e.Offset, c.words...)
		})
	}
}

func manyLabels() string {
	var b strings.Builder
	b.WriteString("a,kind\n")
	for i := range maxClasses + 1 {
		fmt.Fprintf(&b, "1,%d.5\n", i)
	}
	return b.String()
}

// TestCSVBeyondBinary32: an outlier that no binary32 number holds is told, with
// its line; so is a feature whose squares leave binary64.
func TestCSVBeyondBinary32(t *testing.T) {
	s, err := csvSource(t, "a,kind\n1,x\n2,y\n3,x\n1e300,y\n", map[string]any{"test_every": 4})
	if err != nil {
		t.Fatal(err)
	}
	if _, err = s.Load(0); err == nil || !strings.Contains(err.Error(), "test data") || !strings.Contains(err.Error(), "line 5") {
		t.Errorf("error %v, want one of line 5 of the test data", err)
	}
	s, err = csvSource(t, "a,b,kind\n1,1,x\n1,2e200,y\n2,-1,x\n", nil)
	if err != nil {
		t.Fatal(err)
	}
	if _, err = s.Load(0); err == nil || !strings.Contains(err.Error(), `feature "b"`) || !strings.Contains(err.Error(), "too large") {
		t.Errorf("error %v, want one of feature b", err)
	}
}

func TestCSVOptions(t *testing.T) {
	for _, c := range []struct {
		key     string
		changes map[string]any
	}{
		{"file", map[string]any{"file": nil}},
		{"file", map[string]any{"file": ""}},
		{"label", map[string]any{"label": nil}},
		{"label", map[string]any{"label": int64(0)}},
		{"label", map[string]any{"label": true}},
		{"label", map[string]any{"header": false}},
		{"header", map[string]any{"header": "no"}},
		{"ignore", map[string]any{"label": int64(3), "header": false, "ignore": []any{"width"}}},
		{"ignore", map[string]any{"ignore": []any{"kind"}}},
		{"ignore", map[string]any{"ignore": "width"}},
		{"classes", map[string]any{"classes": []any{"a", "a"}}},
		{"classes", map[string]any{"classes": []any{"a"}}},
		{"classes", map[string]any{"classes": []any{int64(1), int64(2)}}},
		{"delimiter", map[string]any{"delimiter": ", "}},
		{"delimiter", map[string]any{"delimiter": "\""}},
		{"delimiter", map[string]any{"delimiter": "\xFF"}},
		{"test", map[string]any{"test": int64(3)}},
		{"test", map[string]any{"test": int64(3), "test_every": int64(5)}},
		{"test_every", map[string]any{"test_every": int64(5), "test_file": "other.csv"}},
		{"test_every", map[string]any{"test_every": int64(11)}},
		{"validation_every", map[string]any{"validation_every": int64(5), "validation_file": "other.csv"}},
		{"validation", map[string]any{"validation": int64(10)}},
		{"train", map[string]any{"train": int64(11)}},
		{"scale", map[string]any{"scale": "unit"}},
	} {
		s, err := csvSource(t, flowers, c.changes)
		if err == nil {
			_, err = s.Load(0)
		}
		wantOptionError(t, err, c.key)
	}
	for key, s := range map[string]*CSV{
		"file":             {},
		"label":            {File: "a"},
		"test_every":       {File: "a", LabelColumn: 1, TestEvery: 1},
		"test":             {File: "a", LabelColumn: 1, Test: -1},
		"scale":            {File: "a", LabelColumn: 1, Scale: "unit"},
		"train":            {File: "a", LabelColumn: 1, Train: -1},
		"validation_every": {File: "a", LabelColumn: 1, ValidationEvery: -2},
	} {
		_, err := s.Load(0)
		wantOptionError(t, err, key)
	}
}

// TestCSVHeaderSuspect: a first line of numbers taken for names raises a doubt.
func TestCSVHeaderSuspect(t *testing.T) {
	d := loadCSV(t, "1,2,0\n3,4,1\n5,6,0\n", map[string]any{"label": int64(3)})
	if !slices.ContainsFunc(d.Warnings, func(w string) bool { return strings.Contains(w, "header = false") }) {
		t.Errorf("warnings %q", d.Warnings)
	}
}

// TestCanonical: each option that determines examples shows, and no path does.
func TestCanonical(t *testing.T) {
	base := map[string]any{}
	seen := map[string]any{}
	for _, changes := range []map[string]any{
		base,
		{"test_every": 2},
		{"test_every": 3},
		{"train": 2},
		{"validation": 1},
		{"validation_every": 2},
		{"scale": "none"},
		{"classes": []any{"x", "y"}},
		{"ignore": []any{"a"}},
		{"label": 2},
		{"delimiter": ";"},
		{"test_file": "elsewhere.csv"},
		{"label": int64(3), "header": false},
		{"test_every": 2, "test": 1},
		{"label": nil, "targets": []any{"a", "b"}},
		{"label": nil, "targets": []any{"b", "a"}},
		{"label": nil, "targets": []any{int64(1)}},
	} {
		s, err := newWith("csv", "/somewhere", map[string]any{"file": "data.csv", "label": "kind"}, changes)
		if err != nil {
			t.Fatal(changes, err)
		}
		c := s.Canonical()
		if other, twice := seen[c]; twice {
			t.Errorf("%v and %v have one canonical text", changes, other)
		}
		if seen[c] = changes; strings.Contains(c, "where") || strings.Contains(c, "\n") {
			t.Errorf("canonical text %q", c)
		}
	}
}

// FuzzCSV: no text makes the reader panic; what it hands out is whole and finite.
func FuzzCSV(f *testing.F) {
	f.Add([]byte(flowers), "kind", 0, true)
	f.Add(zip([]byte(flowers)), "kind", 0, true)
	f.Add([]byte("1,2,0\n3,4,1\n"), "", 3, false)
	f.Add([]byte("\"0\n0\""), "0", 0, true) // a name of two lines must not split the message
	f.Add([]byte("a,\"b\nc\",kind\n1,2,\"x\"\"y\"\n"), "kind", 0, true)
	f.Fuzz(func(t *testing.T, text []byte, label string, column int, header bool) {
		s := &CSV{File: "fuzzed", Label: label, LabelColumn: column, NoHeader: !header}
		if s.check() != nil {
			return
		}
		in, err := newInput("fuzzed", bytes.NewReader(text), int64(len(text)))
		if err != nil {
			return
		}
		table, err := readCSV(in, csvLayout{delimiter: ',', header: header, label: label, labelColumn: column})
		if err != nil {
			if strings.Contains(err.Error(), "\n") {
				t.Errorf("error of several lines: %q", err)
			}
			return
		}
		if len(table.values) != len(table.labels)*len(table.columns) || len(table.lines) != len(table.labels) {
			t.Errorf("%d values and %d lines for %d rows of %d features", len(table.values), len(table.lines), len(table.labels), len(table.columns))
		}
		for _, x := range table.values {
			if x-x != 0 {
				t.Errorf("value %g", x)
			}
		}
	})
}
