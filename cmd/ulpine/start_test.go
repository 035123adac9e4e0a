package main

import (
	"archive/zip"
	"bytes"
	"math"
	"os"
	"strings"
	"testing"

	"ulpine/datasets/npy"
)

// arraysOf reads an NPZ file by name.
func arraysOf(t *testing.T, file string) map[string]*npy.Array {
	t.Helper()
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	all, err := npy.ReadNPZ(bytes.NewReader(raw), int64(len(raw)))
	if err != nil {
		t.Fatal(err)
	}
	byName := map[string]*npy.Array{}
	for _, a := range all {
		byName[a.Name] = a.Array
	}
	return byName
}

// startPlan is tiny under another baseline, with further tables at the end.
func startPlan(format, tables string) string {
	return strings.Replace(tiny, "[[arm]]", "[baseline]\neverything = \""+format+"\"\n[[arm]]", 1) + tables
}

// TestStartRoundTrip: what a run saved is, bit by bit, what the next one starts
// from: binary32, binary64 and binary16 masters, by file and by store alike.
func TestStartRoundTrip(t *testing.T) {
	for _, format := range []string{"fp32", "fp64", "fp16"} {
		t.Run(format, func(t *testing.T) {
			inFolder(t, map[string]string{
				"first.toml":  startPlan(format, ""),
				"file.toml":   startPlan(format, "[start]\nfile = \"w.npz\"\n"),
				"stored.toml": startPlan(format, "[start]\nstore = \"first.store\"\nrun = \"baseline/101\"\n"),
				"again.toml":  startPlan(format, "[start]\nfile = \"w.npz\"\npart = \"initial\"\n"),
			})
			must(t, "run", "first.toml", "--no-report", "--quiet", "--store", "first.store")
			must(t, "show", "baseline/101", "--store", "first.store", "--weights", "w.npz")
			must(t, "run", "file.toml", "--no-report", "--quiet")
			must(t, "show", "baseline/100", "--weights", "second.npz")
			saved, taken := arraysOf(t, "w.npz"), arraysOf(t, "second.npz")
			if len(saved) != 8 {
				t.Fatalf("%d arrays", len(saved))
			}
			for name, a := range saved {
				layer, isFinal := strings.CutPrefix(name, "final/")
				if !isFinal {
					continue
				}
				b := taken["initial/"+layer]
				if b == nil || a.Wide != b.Wide || a.Wide != (format == "fp64") {
					t.Fatalf("%s: %+v became %+v", name, a, b)
				}
				for i, x := range a.Values {
					if math.Float64bits(x) != math.Float64bits(b.Values[i]) {
						t.Errorf("%s: value %d was %v, is %v", name, i, x, b.Values[i])
					}
				}
			}
			// The same values from a store are the same runs.
			if out := must(t, "run", "stored.toml", "--no-report", "--quiet"); !strings.Contains(out, "\n0 of ") {
				t.Errorf("from the store:\n%s", out)
			}
			// Starting replicate 101 from its own initial values changes none of its bits.
			must(t, "run", "again.toml", "--no-report", "--quiet", "--store", "again.store")
			first, again := digestOfRun(t, "baseline/101", "first.store"), digestOfRun(t, "baseline/101", "again.store")
			if first == "" || first != again {
				t.Errorf("digest %s, from its own initial values %s", first, again)
			}
		})
	}
}

// digestOfRun is what show says of a run.
func digestOfRun(t *testing.T, run, store string) string {
	for line := range strings.Lines(must(t, "show", run, "--store", store)) {
		if fields := strings.Fields(line); len(fields) == 2 && fields[0] == "digest" {
			return fields[1]
		}
	}
	return ""
}

// TestStartErrors: one line that says where and what.
func TestStartErrors(t *testing.T) {
	var z bytes.Buffer
	if err := npy.WriteNPZ(&z, []npy.Named{{Name: "layer0.weight", Array: &npy.Array{Shape: []int{2, 1, 9}, Values: make([]float64, 18)}}}); err != nil {
		t.Fatal(err)
	}
	var other bytes.Buffer
	w := zip.NewWriter(&other)
	if _, err := w.Create("readme.txt"); err != nil || w.Close() != nil {
		t.Fatal(err)
	}
	nan := startNaN(t)
	inFolder(t, map[string]string{
		"first.toml": tiny, "some.npz": z.String(), "other.npz": other.String(), "text.npz": "no archive", "nan.npz": nan,
		"wider.toml": strings.Replace(tiny, "out=2", "out=3", 1),
	})
	must(t, "run", "first.toml", "--no-report", "--quiet")
	must(t, "run", "wider.toml", "--no-report", "--quiet", "--store", "wider.store")
	must(t, "show", "baseline/100", "--weights", "good.npz")
	must(t, "show", "baseline/100", "--weights", "wider.npz", "--store", "wider.store")
	for tables, want := range map[string]string{
		"file = \"gone.npz\"":                                       "start.file: cannot read gone.npz",
		"file = \"text.npz\"":                                       "start.file: cannot read text.npz as an archive",
		"file = \"some.npz\"":                                       `it has no array "layer0.bias", which the network has`,
		"file = \"other.npz\"":                                      `member "readme.txt" is no array`,
		"file = \"wider.npz\"":                                      "layer0.weight",
		"file = \"nan.npz\"":                                        "value 3 is NaN",
		"file = \"good.npz\"\npart = \"last\"":                      "unknown word",
		"file = \"good.npz\"\nrun = \"baseline/100\"":               "a run is one of a store",
		"file = \"good.npz\"\nstore = \"ulpine.store\"":             "either a file or a store",
		"part = \"final\"":                                          "either a file or a store",
		"store = \"ulpine.store\"":                                  "run is missing",
		"store = \"gone.store\"\nrun = \"baseline/100\"":            "gone.store",
		"store = \"ulpine.store\"\nrun = \"baseline/900\"":          "baseline/900",
		"store = \"ulpine.store\"\nrun = \"nobody\"":                "nobody",
		"store = \"wider.store\"\nrun = \"baseline/100\"":           "has the shape 3x1x9, the network's layer0.weight has 2x1x9",
		"file = \"good.npz\"\n[pretrain]\ntask = { data_seed = 2 }": "both say where arms start",
		"fiel = \"good.npz\"":                                       `did you mean "file"?`,
	} {
		if err := os.WriteFile("start.toml", []byte(tiny+"[start]\n"+tables+"\n"), 0o644); err != nil {
			t.Fatal(err)
		}
		_, errs, code := ulpine(t, "run", "start.toml", "--no-report", "--quiet", "--store", "mine.store")
		if code != exitBadInput || !strings.Contains(errs, want) || !strings.Contains(errs, "start.toml:") || strings.Contains(errs, "panic") {
			t.Errorf("%q: exit code %d, %s\nwant %s", tables, code, errs, want)
		}
	}
}

// startNaN is an archive that fits but for one value.
func startNaN(t *testing.T) string {
	var b bytes.Buffer
	weight := make([]float64, 18)
	weight[3] = math.NaN()
	zeros := func(shape ...int) *npy.Array {
		n, _ := npy.Len(shape)
		return &npy.Array{Shape: shape, Values: make([]float64, n)}
	}
	err := npy.WriteNPZ(&b, []npy.Named{
		{Name: "layer0.weight", Array: &npy.Array{Shape: []int{2, 1, 9}, Values: weight}},
		{Name: "layer0.bias", Array: zeros(2)},
		{Name: "layer2.weight", Array: zeros(5, 60)},
		{Name: "layer2.bias", Array: zeros(5)},
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}
