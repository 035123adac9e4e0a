package datasets

import (
	"bytes"
	"compress/gzip"
	"encoding/binary"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// idxBytes composes an IDX file of unsigned bytes.
func idxBytes(content []byte, dims ...int) []byte {
	b := []byte{0, 0, 8, byte(len(dims))}
	for _, n := range dims {
		b = binary.BigEndian.AppendUint32(b, uint32(n))
	}
	return append(b, content...)
}

func zip(content []byte) []byte {
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	w.Write(content)
	w.Close()
	return b.Bytes()
}

// writeFiles writes files into a folder of the test's own and returns it.
func writeFiles(t *testing.T, files map[string][]byte) string {
	t.Helper()
	dir := t.TempDir()
	for name, content := range files {
		if err := os.WriteFile(filepath.Join(dir, name), content, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// tinyIDX are four 2 x 2 images of two classes, and one of them to test on.
func tinyIDX() map[string][]byte {
	return map[string][]byte{
		"images": idxBytes([]byte{0, 51, 102, 153, 1, 2, 3, 4, 255, 254, 253, 252, 10, 20, 30, 40}, 4, 2, 2),
		"labels": idxBytes([]byte{0, 1, 1, 0}, 4),
		"timage": idxBytes([]byte{9, 8, 7, 6}, 1, 2, 2),
		"tlabel": idxBytes([]byte{1}, 1),
	}
}

var idxKeys = map[string]any{"train_images": "images", "train_labels": "labels", "test_images": "timage", "test_labels": "tlabel"}

// newWith makes a source of the given keys and changes.
func newWith(name, folder string, keys, changes map[string]any) (Source, error) {
	values := map[string]any{}
	for _, m := range []map[string]any{keys, changes} {
		for k, v := range m {
			if v == nil {
				delete(values, k)
			} else {
				values[k] = v
			}
		}
	}
	return New(name, Options{Values: values, Folder: folder})
}

func TestIDXSmall(t *testing.T) {
	files := tinyIDX()
	files["labels"] = zip(files["labels"]) // told by its content, not its name
	dir := writeFiles(t, files)
	s, err := newWith("idx", dir, idxKeys, map[string]any{"scale": "none"})
	if err != nil {
		t.Fatal(err)
	}
	d, err := s.Load(0)
	if err != nil {
		t.Fatal(err)
	}
	if want := []float32{0, 51, 102, 153, 1, 2, 3, 4, 255, 254, 253, 252, 10, 20, 30, 40}; !slices.Equal(d.Train.Inputs.Float32s(), want) {
		t.Errorf("pixels %v", d.Train.Inputs.Float32s())
	}
	if !slices.Equal(d.Train.Labels, []int32{0, 1, 1, 0}) || !slices.Equal(d.Test.Labels, []int32{1}) {
		t.Errorf("labels %v, %v", d.Train.Labels, d.Test.Labels)
	}
	if !slices.Equal(d.Shape, []int{1, 2, 2}) || d.Classes != 2 {
		t.Errorf("shape %v, %d classes", d.Shape, d.Classes)
	}
	if len(d.Warnings) != 1 || !strings.Contains(d.Warnings[0], "test set has no example of class \"0\"") {
		t.Errorf("warnings %q", d.Warnings)
	}
}

// TestIDXShapes: images get a channel; without test files there is no test set.
func TestIDXShapes(t *testing.T) {
	for _, c := range []struct{ dims, shape []int }{
		{[]int{4, 4}, []int{4}},
		{[]int{4, 2, 2}, []int{1, 2, 2}},
		{[]int{4, 4, 1, 1}, []int{4, 1, 1}},
	} {
		files := tinyIDX()
		files["images"] = idxBytes(files["images"][16:], c.dims...)
		s, err := newWith("idx", writeFiles(t, files), idxKeys, map[string]any{"test_images": nil, "test_labels": nil})
		if err != nil {
			t.Fatal(err)
		}
		d, err := s.Load(0)
		if err != nil {
			t.Fatal(err)
		}
		f, err := s.Facts()
		if err != nil || !slices.Equal(f.Shape, c.shape) || !slices.Equal(d.Shape, c.shape) || d.Test.Len() != 0 {
			t.Errorf("dimensions %v: shapes %v and %v, error %v, want %v", c.dims, f.Shape, d.Shape, err, c.shape)
		}
	}
}

// wantFileError insists on one line that names file and place, with a remedy.
func wantFileError(t *testing.T, err error, file string, offset int64, words ...string) {
	t.Helper()
	var e *FileError
	if !errors.As(err, &e) {
		t.Errorf("error %v, want a *FileError", err)
		return
	}
	if filepath.Base(e.File) != file || e.Offset != offset || e.Remedy == "" || strings.Contains(err.Error(), "\n") {
		t.Errorf("error %q: file %s, byte %d, want %s, byte %d", err, e.File, e.Offset, file, offset)
	}
	for _, w := range words {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("error %q does not say %q", err, w)
		}
	}
}

func TestIDXDamage(t *testing.T) {
	large := idxBytes(nil, 1<<15, 1<<15, 1<<15)
	zipped := zip(idxBytes(bytes.Repeat([]byte{1, 2, 3}, 4000), 4, 3000))
	corrupt := slices.Clone(zipped)
	corrupt[len(corrupt)-6] ^= 0xFF // the checksum
	for _, c := range []struct {
		name    string
		file    string
		content []byte
		offset  int64
		words   []string
	}{
		{"no IDX", "images", []byte("\x89PNG\r\n\x1a\n"), 0, []string{"wrong magic number 89504e47", "00000803"}},
		{"empty file", "images", nil, 0, []string{"too short"}},
		{"header cut", "images", []byte{0, 0, 8, 3, 0, 0}, 4, []string{"too short", "3 dimensions"}},
		{"floats", "images", []byte{0, 0, 0x0D, 3, 0, 0, 0, 1}, 0, []string{"binary32", "convert"}},
		{"too many dimensions", "images", []byte{0, 0, 8, 200}, 0, []string{"200 dimensions"}},
		{"short", "images", idxBytes(make([]byte, 15), 4, 2, 2), 31, []string{"4x2x2, 32 bytes", "ends after 31"}},
		{"trailing", "images", idxBytes(make([]byte, 17), 4, 2, 2), 32, []string{"goes on for 1 more"}},
		{"zipped short", "images", zip(idxBytes(make([]byte, 15), 4, 2, 2)), 31, []string{"end after 15 of 16 bytes"}},
		{"zipped trailing", "images", zip(idxBytes(make([]byte, 17), 4, 2, 2)), 32, []string{"goes on"}},
		{"absurd", "images", large, 8, []string{"more than"}},
		{"absurd zipped", "images", zip(large), 8, []string{"more than"}},
		{"larger than zip can hold", "images", zip(idxBytes(nil, 4, 1<<20)), 0, []string{"more than the compressed file can hold"}},
		{"no examples", "images", idxBytes(nil, 0, 2, 2), 4, []string{"dimension 1 is 0"}},
		{"empty images", "images", idxBytes(nil, 4, 0, 2), 8, []string{"dimension 2 is 0"}},
		{"gzip cut", "images", zipped[:len(zipped)-9], 12012, []string{"end too early", "fetch"}},
		{"gzip checksum", "images", corrupt, 12012, []string{"damaged"}},
		{"gzip header", "images", []byte{0x1F, 0x8B, 99, 0, 0, 0, 0, 0, 0, 0}, 0, []string{"gzip"}},
		{"gzip and more", "images", append(slices.Clone(zipped), "tail of something else"...), 12012, []string{"followed by something else"}},
		{"labels as images", "images", idxBytes([]byte{0, 1, 1, 0}, 4), 3, []string{"holds labels", "train_images"}},
		{"images as labels", "labels", idxBytes(make([]byte, 16), 4, 2, 2), 3, []string{"holds no labels", "train_labels"}},
		{"counts", "labels", idxBytes([]byte{0, 1, 1}, 3), 4, []string{"3 labels", "4 images"}},
		{"one class", "labels", idxBytes([]byte{0, 0, 0, 0}, 4), -1, []string{"one class"}},
		{"label out of range", "tlabel", idxBytes([]byte{2}, 1), 8, []string{"label 2 of example 1", "classes = 3"}},
		{"test size", "timage", idxBytes(make([]byte, 6), 1, 2, 3), 4, []string{"2x3", "2x2"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			files := tinyIDX()
			files[c.file] = c.content
			s, err := newWith("idx", writeFiles(t, files), idxKeys, nil)
			if err != nil {
				t.Fatal(err)
			}
			_, err = s.Load(0)
			wantFileError(t, err, c.file, c.offset, c.words...)
		})
	}
}

func TestIDXMissingFile(t *testing.T) {
	s, err := newWith("idx", t.TempDir(), idxKeys, nil)
	if err != nil {
		t.Fatal(err)
	}
	_, err = s.Facts()
	wantFileError(t, err, "images", -1, "cannot be found", "train_images")
	dir := t.TempDir()
	if err := os.Mkdir(filepath.Join(dir, "images"), 0o755); err != nil {
		t.Fatal(err)
	}
	s, _ = newWith("idx", dir, idxKeys, nil)
	_, err = s.Load(0)
	wantFileError(t, err, "images", -1, "no regular file")
	if !errors.Is(func() error { _, err := (&IDX{TrainImages: "nowhere", TrainLabels: "x"}).Load(0); return err }(), os.ErrNotExist) {
		t.Error("the system's error is not wrapped")
	}
}

// TestIDXOptions: faults of options, found by New or when the files are known.
func TestIDXOptions(t *testing.T) {
	dir := writeFiles(t, tinyIDX())
	for _, c := range []struct {
		key     string
		changes map[string]any
	}{
		{"train_images", map[string]any{"train_images": nil}},
		{"train_labels", map[string]any{"train_labels": ""}},
		{"test_labels", map[string]any{"test_labels": nil}},
		{"test_images", map[string]any{"test_images": nil}},
		{"test", map[string]any{"test_images": nil, "test_labels": nil, "test": int64(3)}},
		{"test", map[string]any{"test": int64(2)}},
		{"train", map[string]any{"train": int64(5)}},
		{"train", map[string]any{"train": int64(3), "validation": int64(2)}},
		{"validation", map[string]any{"validation": int64(4)}},
		{"validation", map[string]any{"validation": int64(2), "validation_every": int64(3)}},
		{"validation_every", map[string]any{"validation_every": int64(1)}},
		{"classes", map[string]any{"classes": int64(1)}},
		{"scale", map[string]any{"scale": "range"}},
	} {
		s, err := newWith("idx", dir, idxKeys, c.changes)
		if err == nil {
			_, err = s.Facts()
		}
		wantOptionError(t, err, c.key)
	}
	// Literals are checked as well.
	for key, s := range map[string]*IDX{
		"train_images":     {},
		"train":            {TrainImages: "a", TrainLabels: "b", Train: -1},
		"validation":       {TrainImages: "a", TrainLabels: "b", Validation: -1},
		"validation_every": {TrainImages: "a", TrainLabels: "b", ValidationEvery: 1},
		"classes":          {TrainImages: "a", TrainLabels: "b", Classes: 257},
		"test":             {TrainImages: "a", TrainLabels: "b", TestImages: "c", TestLabels: "d", Test: -1},
		"scale":            {TrainImages: "a", TrainLabels: "b", Scale: "grey"},
	} {
		_, err := s.Load(0)
		wantOptionError(t, err, key)
	}
}

// TestIDXConstant: pixels that are all equal become 0, and a warning says so.
func TestIDXConstant(t *testing.T) {
	files := tinyIDX()
	files["images"] = idxBytes(bytes.Repeat([]byte{77}, 16), 4, 2, 2)
	s, err := newWith("idx", writeFiles(t, files), idxKeys, map[string]any{"scale": "standardise"})
	if err != nil {
		t.Fatal(err)
	}
	d, err := s.Load(0)
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range append(slices.Clone(d.Train.Inputs.Float32s()), d.Test.Inputs.Float32s()...) {
		if v != 0 {
			t.Fatalf("value %g, want 0", v)
		}
	}
	if !slices.ContainsFunc(d.Warnings, func(w string) bool { return strings.Contains(w, "constant") }) {
		t.Errorf("warnings %q do not tell of the constant", d.Warnings)
	}
}

// FuzzIDX: no content makes the reader panic or hand out less than it announces.
func FuzzIDX(f *testing.F) {
	for _, content := range tinyIDX() {
		f.Add(content)
		f.Add(zip(content))
	}
	f.Add([]byte{0, 0, 8, 5, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255})
	f.Fuzz(func(t *testing.T, content []byte) {
		in, err := newInput("fuzzed", bytes.NewReader(content), int64(len(content)))
		if err == nil {
			var file idxFile
			if file, err = readIDX(in); err == nil && len(file.content) != volume(file.dims) {
				t.Errorf("%d bytes of a file of %v", len(file.content), file.dims)
			}
		}
		if err != nil && strings.Contains(err.Error(), "\n") {
			t.Errorf("error of several lines: %q", err)
		}
	})
}
