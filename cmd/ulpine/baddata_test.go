package main

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"os"
	"runtime"
	"strings"
	"testing"

	"ulpine/datasets/npy"
)

// onData is a plan on a task, with the last layer and the loss to go with it.
func onData(task, rest string) string {
	return "title = \"data\"\n[task]\n" + task + "\n[network]\nlayers = [\"dense 2\"]\n" +
		"[training]\nlearning_rate = 0.1\nbatch = 4\nepochs = 1\n" + rest +
		"\n[replicates]\ncount = 2\n[claim]\nmetric = \"training loss\"\nmargin = 0.1\n[[arm]]\nname = \"bf16\"\nstorage = \"bf16\"\n"
}

// header is an NPY file that announces a shape and holds nothing.
func header(kind, shape string) string {
	head := fmt.Sprintf("{'descr': '%s', 'fortran_order': False, 'shape': %s, }\n", kind, shape)
	return "\x93NUMPY\x01\x00" + string(binary.LittleEndian.AppendUint16(nil, uint16(len(head)))) + head
}

// idxHeader is an IDX file that announces dimensions and holds nothing.
func idxHeader(dims ...uint32) string {
	b := []byte{0, 0, 8, byte(len(dims))}
	for _, d := range dims {
		b = binary.BigEndian.AppendUint32(b, d)
	}
	return string(b)
}

// array is a small NPY file.
func array(t *testing.T, shape []int, values ...float64) string {
	t.Helper()
	var b bytes.Buffer
	if err := npy.Write(&b, &npy.Array{Shape: shape, Wide: true, Values: values}); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestBadData: whatever a file holds, one line that names it and says what to do, exit
// code 2, no panic, and no memory on a header's word.
func TestBadData(t *testing.T) {
	csv := "data = \"csv\"\nfile = \"d\"\nlabel = \"kind\""
	regression := "data = \"csv\"\nfile = \"d\"\ntargets = [\"x\", \"y\"]"
	arrays := "data = \"npy\"\ntrain_inputs = \"d\"\ntrain_labels = \"labels\""
	images := "data = \"idx\"\ntrain_images = \"d\"\ntrain_labels = \"labels\""
	const rows = "a,kind\n1,x\n2,y\n3,x\n4,y\n"
	squared := "loss = \"mean-squared-error\"\n"
	for name, c := range map[string]struct{ data, task, rest, want string }{
		"good":                    {rows, csv, "", ""},
		"NaN":                     {strings.Replace(rows, "2,", "NaN,", 1), csv, "", "d, line 3, column 1"},
		"infinite":                {strings.Replace(rows, "2,", "-inf,", 1), csv, "", "is not a finite number"},
		"beyond binary64":         {strings.Replace(rows, "2,", "1e999,", 1), csv, "", "is not a finite number"},
		"too large":               {strings.Replace(rows, "2,", "1e300,", 1), csv, "", "too large to standardise"},
		"beyond binary32":         {strings.Replace(rows, "2,", "1e300,", 1), csv + "\nscale = \"none\"", "", "beyond binary32"},
		"target beyond binary32":  {"a,x,y\n1,2,3\n1,2e50,3\n2,2,3\n3,3,3\n", regression, squared, "line 3: target \"x\""},
		"empty":                   {"", csv, "", "there are no rows of data"},
		"names only":              {"a,kind\n", csv, "", "there are no rows of data"},
		"text for a number":       {strings.Replace(rows, "2,", "two,", 1), csv, "", `"two" of "a" is no number`},
		"a hole":                  {strings.Replace(rows, "2,", ",", 1), csv, "", "the field is empty"},
		"a short row":             {strings.Replace(rows, "2,y", "2", 1), csv, "", "the row has 1 fields"},
		"one class":               {strings.ReplaceAll(rows, "y", "x"), csv, "", "all rows have the label"},
		"no such target":          {rows, regression, squared, `no column is called "x"`},
		"labels for a regression": {rows, csv, squared, "mean-squared-error takes targets of values"},
		"targets for classes":     {"a,x,y\n1,2,3\n1,2,3\n2,2,3\n3,3,3\n", regression, "", "cross-entropy takes classes"},
		"batch beyond the data":   {"a,kind\n1,x\n2,y\n", csv, "", "a batch of 4 is larger than the 2 training examples"},
		"a wrong type":            {rows, csv + "\ntrain = \"all\"", "", "is no whole number"},
		"a list for a file":       {rows, "data = \"csv\"\nfile = [\"d\"]\nlabel = \"kind\"", "", "is no text"},
		"no rows for training":    {rows, csv + "\nvalidation = 4", "", "leave none to train on"},
		"binary":                  {"\x00\x01\x02\xff\xfe", csv, "", "no column is called"},

		"NPY of terabytes":     {header("<f8", "(1000000000, 1000)"), arrays, "", "array is too large"},
		"NPY beyond an int":    {header("<f8", "(9223372036854775807, 4)"), arrays, "", "is larger than memory"},
		"NPY of gigabytes":     {header("<f4", "(1000000, 500)"), arrays, "", "file ends before its data"},
		"NPY without examples": {header("<f8", "(0, 4)"), arrays, "", "the inputs have the shape [0 4]"},
		"NPY of text":          {header("<U8", "(4,)"), arrays, "", "element type is not supported"},
		"NPY with NaN":         {header("<f8", "(4, 1)") + strings.Repeat("\xff", 32), arrays, "", "train_inputs: value 0 is NaN"},
		"NPY no file":          {"plain text", arrays, "", "not an NPY file"},
		"NPY too few":          {array(t, []int{3, 1}, 1, 2, 3), arrays, "", "there are 3 inputs"},

		"IDX of terabytes": {idxHeader(1<<30, 1<<20), images, "", "announces more than"},
		"IDX of gigabytes": {idxHeader(500_000, 28, 28), images, "", "the file ends after"},
		"IDX of nothing":   {idxHeader(0, 28, 28), images, "", "the file holds no examples"},
		"IDX no file":      {"plain text", images, "", "wrong magic number"},
	} {
		t.Run(name, func(t *testing.T) {
			inFolder(t, map[string]string{"d": c.data, "plan.toml": onData(c.task, c.rest), "labels": array(t, []int{4}, 0, 1, 0, 1)})
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			_, errs, code := ulpine(t, "run", "plan.toml", "--no-report", "--quiet")
			runtime.ReadMemStats(&after)
			if c.want == "" {
				if code != exitOK {
					t.Fatalf("exit code %d: %s", code, errs)
				}
				return
			}
			if code != exitBadInput || !strings.Contains(errs, c.want) || strings.Count(errs, "\n") != 1 || !strings.Contains(errs, "plan.toml:") || strings.Contains(errs, "panic") {
				t.Errorf("exit code %d, want one line with %q:\n%s", code, c.want, errs)
			}
			if used := after.TotalAlloc - before.TotalAlloc; used > 64<<20 {
				t.Errorf("%d bytes were allocated to say so", used)
			}
			if _, err := os.Stat("ulpine.store"); err == nil {
				t.Error("a store was made for a plan that cannot be run")
			}
		})
	}
}

// TestExplodingData: data that training cannot stand ends in words, not in a panic.
func TestExplodingData(t *testing.T) {
	text := "a,x,y\n"
	for i := range 8 {
		text += fmt.Sprintf("%de30,%de30,1\n", i-4, i)
	}
	inFolder(t, map[string]string{"d": text, "plan.toml": strings.Replace(onData("data = \"csv\"\nfile = \"d\"\ntargets = [\"x\", \"y\"]\ntest_every = 2\nscale = \"none\"", "loss = \"mean-squared-error\"\n"), "training loss", "test RMSE", 1)})
	_, errs, code := ulpine(t, "run", "plan.toml", "--no-report", "--quiet")
	if code != exitBadInput || !strings.Contains(errs, "the baseline diverged in 2 of 2 replicates") || strings.Contains(errs, "panic") {
		t.Errorf("exit code %d: %s", code, errs)
	}
}

// TestRegressionIsListed: list and show print the metric that the plan claims.
func TestRegressionIsListed(t *testing.T) {
	text := "a,x,y\n"
	for i := range 40 {
		text += fmt.Sprintf("%d,%d,%d\n", i, i%7, i%3)
	}
	plan := strings.Replace(onData("data = \"csv\"\nfile = \"d\"\ntargets = [\"x\", \"y\"]\nvalidation_every = 4", "loss = \"mean-squared-error\"\n"), "training loss", "validation RMSE", 1)
	loss := strings.Replace(plan, "validation RMSE", "validation loss", 1)
	inFolder(t, map[string]string{"d": text, "plan.toml": plan, "loss.toml": strings.Replace(loss, "\"bf16\"", "\"fp16\"", 2)})
	if out := must(t, "run", "plan.toml", "--no-report", "--quiet"); !strings.Contains(out, "units of the target") {
		t.Errorf("RMSE:\n%s", out)
	}
	list := must(t, "list")
	if !strings.Contains(list, "validation RMSE") || strings.Contains(list, "test accuracy") || strings.Contains(list, " - ") {
		t.Errorf("list:\n%s", list)
	}
	if out := must(t, "list", "--json"); !strings.Contains(out, `"metric":"validation RMSE"`) || strings.Contains(out, `"score":null`) {
		t.Errorf("list --json:\n%s", out)
	}
	show := must(t, "show", "baseline/1")
	for _, want := range []string{"training RMSE", "validation RMSE", "validation loss"} {
		if !strings.Contains(show, want) {
			t.Errorf("show lacks %s:\n%s", want, show)
		}
	}
	if strings.Contains(show, "accuracy") || strings.Contains(show, "test RMSE") {
		t.Errorf("show:\n%s", show)
	}
	if out := must(t, "run", "loss.toml", "--no-report", "--quiet", "--store", "loss.store"); !strings.Contains(out, "units of the loss") || strings.Contains(out, "nat") {
		t.Errorf("loss of a regression:\n%s", out)
	}
}

// TestEpochsToATargetAreListed: a count of epochs is read from all of them.
func TestEpochsToATargetAreListed(t *testing.T) {
	plan := strings.Replace(tiny, "test accuracy", "epochs to test accuracy 0.999", 1)
	inFolder(t, map[string]string{"tiny.toml": plan})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	if list := must(t, "list"); !strings.Contains(list, "epochs to test accuracy 0.999") || !strings.Contains(list, "3.0000") {
		t.Errorf("list:\n%s", list)
	}
}
