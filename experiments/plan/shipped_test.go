package plan

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"ulpine/datasets/npy"
	"ulpine/experiments/plans"
	"ulpine/trainer"
)

// shipped returns the embedded plans by name.
func shipped(t *testing.T) map[string]string {
	t.Helper()
	entries, err := plans.Files.ReadDir(".")
	if err != nil {
		t.Fatal(err)
	}
	all := map[string]string{}
	for _, e := range entries {
		text, err := plans.Files.ReadFile(e.Name())
		if err != nil {
			t.Fatal(err)
		}
		all[e.Name()] = string(text)
	}
	return all
}

// writeIDX writes a file of unsigned bytes in the IDX layout: two zero bytes,
// the type 8, the number of dimensions, each dimension in four bytes, the data
// (Y. LeCun's MNIST page, "The IDX file format").
func writeIDX(t *testing.T, file string, dims []uint32, at func(i int) byte) {
	t.Helper()
	var b bytes.Buffer
	b.Write([]byte{0, 0, 8, byte(len(dims))})
	n := 1
	for _, d := range dims {
		b.Write(binary.BigEndian.AppendUint32(nil, d))
		n *= int(d)
	}
	for i := range n {
		b.WriteByte(at(i))
	}
	if err := os.WriteFile(file, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
}

// writeDigits writes the four files that digits-idx.toml names, with few examples.
func writeDigits(t *testing.T, folder string) {
	t.Helper()
	if err := os.MkdirAll(folder, 0o755); err != nil {
		t.Fatal(err)
	}
	for _, set := range []struct {
		name string
		n    uint32
	}{{"train", 64}, {"t10k", 20}} {
		writeIDX(t, filepath.Join(folder, set.name+"-images-idx3-ubyte.gz"), []uint32{set.n, 28, 28}, func(i int) byte { return byte(i) })
		writeIDX(t, filepath.Join(folder, set.name+"-labels-idx1-ubyte.gz"), []uint32{set.n}, func(i int) byte { return byte(i % 10) })
	}
}

// writeArrays writes the archive that arrays.toml names.
func writeArrays(t *testing.T, folder string) {
	t.Helper()
	var b bytes.Buffer
	x := npy.Array{Shape: []int{32, 4}, Values: make([]float64, 128)}
	for i := range x.Values {
		x.Values[i] = float64(i * i % 17)
	}
	y := npy.Array{Shape: []int{32, 1}, Values: x.Values[:32]}
	if err := npy.WriteNPZ(&b, []npy.Named{{Name: "inputs", Array: &x}, {Name: "targets", Array: &y}}); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(folder, "arrays.npz"), b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
}

// writeSensors writes the tables that sensors-csv.toml names.
func writeSensors(t *testing.T, folder string) {
	t.Helper()
	for _, name := range []string{"sensors-1.csv", "sensors-2.csv", "sensors-test.csv"} {
		text := "speed,wear,load,heat,sound,current\n"
		for i := range 20 {
			text += fmt.Sprintf("%d,%d,%d,%d,%d,%d\n", i, i*i%7, i*3%5, i*i%11, i%3, i*i*i%13)
		}
		if err := os.WriteFile(filepath.Join(folder, name), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
}

// writeWeights writes the parameters that from-stored-run.toml starts from, as show
// --weights does.
func writeWeights(t *testing.T, file string) {
	t.Helper()
	p := load(t, shipped(t)["missed-faults.toml"])
	var arrays []npy.Named
	for _, q := range p.Network.ParamShapes() {
		n, _ := npy.Len(q.Shape)
		arrays = append(arrays, npy.Named{Name: "final/" + q.Name, Array: &npy.Array{Shape: q.Shape, Values: make([]float64, n)}})
	}
	var b bytes.Buffer
	if err := npy.WriteNPZ(&b, arrays); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(file, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
}

// What data and a pretraining on other data have to do with the plan.
func TestTasksFromTables(t *testing.T) {
	folder := t.TempDir()
	rows := "x,y,note,kind\n"
	for i := range 24 {
		rows += fmt.Sprintf("%d,%d,7,%s\n", i, i*i, []string{"even", "odd"}[i%2])
	}
	if err := os.WriteFile(filepath.Join(folder, "t.csv"), []byte(rows), 0o600); err != nil {
		t.Fatal(err)
	}
	task := "data = \"csv\"\nfile = \"t.csv\"\nlabel = \"kind\"\nignore = [\"note\"]\ntest_every = 4\n[network]\nlayers = [\"dense 2\"]\n[training]\nlearning_rate = 0.1\nbatch = 4\nepochs = 1\n"
	rest := basePlan[strings.Index(basePlan, "[replicates]"):]
	file := filepath.Join(folder, "x.toml")
	p, err := LoadFrom(texts{file: "[task]\n" + task + rest}, file)
	if err != nil {
		t.Fatal(err)
	}
	if p.Task.Train != 18 || p.Task.Test != 6 || volume(p.Task.Shape) != 2 || len(p.Task.ClassNames) != 2 {
		t.Errorf("%+v", p.Task.Facts)
	}
	// Pretraining on data of another shape cannot leave weights that fit.
	all := failures(t, texts{file: "[task]\n" + task + "[pretrain.task]\ndata = \"pump-vibration\"\n" + rest}, file)
	if len(all) != 1 || all[0].Key != "pretrain.task" || !strings.Contains(all[0].Reason, "examples of 1x128 in 5 classes do not fit the network, which takes 2 in 2 classes") {
		t.Errorf("%v", all)
	}
	_, err = LoadFrom(texts{file: "[task]\n" + strings.Replace(task, "t.csv", "gone.csv", 1) + rest}, file)
	if !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("the cause is not wrapped: %v", err)
	}
}

// Every plan that ships loads without a warning and can be spelt out.
func TestShippedPlansLoad(t *testing.T) {
	folder := t.TempDir()
	for _, images := range []string{"", "mnist", "fashion-mnist"} {
		writeDigits(t, filepath.Join(folder, images))
	}
	writeArrays(t, folder)
	writeSensors(t, folder)
	writeWeights(t, filepath.Join(folder, "pump-weights.npz"))
	all := shipped(t)
	for _, name := range []string{"first-look.toml", "sixteen-bit.toml", "digits-idx.toml"} {
		if all[name] == "" {
			t.Errorf("%s is not embedded", name)
		}
	}
	source := texts{} // all of them, as one may include another
	for name, text := range all {
		source[filepath.ToSlash(filepath.Join(folder, name))] = text
	}
	for name := range all {
		p, err := LoadFrom(source, filepath.ToSlash(filepath.Join(folder, name)))
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		if len(p.Warnings) > 0 || p.Title == "" || p.Question == "" {
			t.Errorf("%s: warnings %q, title %q, question %q", name, p.Warnings, p.Title, p.Question)
		}
		if text := ResolveText(p, ResolveOptions{Rate: 1e9, Workers: 2}); !strings.Contains(text, p.Title) {
			t.Errorf("%s resolves to %q", name, text)
		}
	}
}

// Every layer, loss and optimizer is shown by a plan that ships, and the options that
// are no word of these tables as well.
func TestShippedPlansShowEverything(t *testing.T) {
	seen, texts := map[string]bool{}, ""
	for _, text := range shipped(t) {
		var lines []string
		for line := range strings.Lines(text) {
			if !strings.HasPrefix(line, "#") {
				lines = append(lines, line)
			}
		}
		texts += strings.Join(lines, "")
	}
	for _, word := range regexp.MustCompile(`[a-z0-9-]+`).FindAllString(texts, -1) {
		seen[word] = true
	}
	for _, names := range [][]string{trainer.LayerNames(), trainer.LossNames(), trainer.OptimizerNames()} {
		for _, name := range names {
			if name != "flatten" && !seen[name] { // dense flattens by itself
				t.Errorf("no shipped plan has %s", name)
			}
		}
	}
	for _, option := range []string{
		"stride=", "pad=", "dilation=", "groups=", "label_smoothing", "momentum", "weight_decay", "clip_norm", "compensated = true",
		"multiply", "cosine", "warm_up", "loss_scale", "rounding = \"stochastic\"", "[controls]", "[pretrain",
	} {
		if !strings.Contains(texts, option) {
			t.Errorf("no shipped plan has %s", option)
		}
	}
}

// Whatever the layers, an arm in which everything is binary32 is the baseline: the same
// text, so the same runs.
func TestEverythingSingleIsTheBaseline(t *testing.T) {
	for _, name := range []string{"attention.toml", "recurrent.toml", "depthwise.toml", "norm-statistics.toml", "weight-decay.toml"} {
		text := shipped(t)[name]
		at := strings.Index(text, "[[arm]]")
		p := load(t, text[:at]+"[[arm]]\nname = \"single\"\neverything = \"fp32\"\n"+text[at:])
		if p.Arms[1].Name != "single" || p.Arms[1].Canonical != p.Arms[0].Canonical || p.Arms[2].Canonical == p.Arms[0].Canonical {
			t.Errorf("%s: %q is not the baseline, or %q is", name, p.Arms[1].Name, p.Arms[2].Name)
		}
	}
}

// The first look must stay a matter of a minute.
func TestFirstLookIsSmall(t *testing.T) {
	p := load(t, shipped(t)["first-look.toml"])
	if w := p.Work(); w.MACs > 20e9 {
		t.Errorf("%.3g multiply-adds, more than 20 G", float64(w.MACs))
	} else {
		t.Logf("%.3g multiply-adds in %d runs", float64(w.MACs), w.Runs)
	}
	if p.Claim.Margin != 0.01 || p.Claim.Metric != "test accuracy" || p.Training.EvaluateTest != trainer.LastEpoch {
		t.Errorf("claim %+v, test data evaluated %s", p.Claim, p.Training.EvaluateTest)
	}
	if p.Pretrain == nil || len(p.Contrasts) != 1 || p.Contrasts[0] != (Contrast{"bf16-stochastic-update", "bf16-nearest", 0.01}) {
		t.Errorf("pretraining %v, contrasts %v", p.Pretrain, p.Contrasts)
	}
}

func TestSixteenBitPlan(t *testing.T) {
	p := load(t, shipped(t)["sixteen-bit.toml"])
	var slugs []string
	for _, a := range p.Arms {
		slugs = append(slugs, a.Slug)
	}
	if got := strings.Join(slugs, " "); got != "baseline bf16-nearest bf16-stochastic-update fp16-nearest-fp16-sums" {
		t.Errorf("arms %s", got)
	}
	if p.Runs() != 40 || p.Network.Outputs() != 5 || len(p.Network.Layers) != 7 {
		t.Errorf("%d runs, %d outputs", p.Runs(), p.Network.Outputs())
	}
	expectLayer4(t, &p.Arms[2])
}

func expectLayer4(t *testing.T, a *Arm) {
	t.Helper()
	for point, want := range map[string]string{
		"forward.weight": bf16, "forward.product": fp32, "forward.sum": fp32 + seq, "update.step": bf16,
		"update.master": "bfloat16, stochastic r=16 truncated, overflow infinity",
	} {
		if got := a.at(4, point); got != want {
			t.Errorf("%s: %q, want %q", point, got, want)
		}
	}
}

func TestPathsAreRelativeToThePlan(t *testing.T) {
	folder := t.TempDir()
	writeDigits(t, folder)
	text := shipped(t)["digits-idx.toml"]
	p, err := LoadFrom(texts{folder + "/x.toml": text}, folder+"/x.toml")
	if err != nil {
		t.Fatal(err)
	}
	if p.Task.Train != 64 || p.Task.Test != 20 || len(p.Task.ClassNames) != 10 || volume(p.Task.Shape) != 784 {
		t.Errorf("%+v", p.Task.Facts)
	}
	if strings.Contains(p.TaskCanonical(), folder) {
		t.Error("the canonical text holds a path")
	}
	// The file that names the data set counts when it is included.
	head, rest, _ := strings.Cut(text, "[network]")
	s := texts{"elsewhere/plan.toml": "include = \"" + folder + "/data.toml\"\n[network]" + rest, folder + "/data.toml": head}
	if p, err = LoadFrom(s, "elsewhere/plan.toml"); err != nil || p.Task.Train != 64 {
		t.Fatal(err)
	}
}

func volume(shape []int) int {
	n := 1
	for _, d := range shape {
		n *= d
	}
	return n
}

func TestFilesThatAreNotThere(t *testing.T) {
	folder := t.TempDir()
	text := shipped(t)["digits-idx.toml"]
	line := 1 + strings.Count(text[:strings.Index(text, "train_images")], "\n")
	all := failures(t, texts{folder + "/x.toml": text}, folder+"/x.toml")
	e := all[0]
	if len(all) != 1 || e.Line != line || e.Key != "task.train_images" || !strings.Contains(e.Reason, filepath.Join(folder, "train-images-idx3-ubyte.gz")) || e.Remedy == "" {
		t.Errorf("%v", all)
	}
	writeDigits(t, folder)
	writeIDX(t, filepath.Join(folder, "t10k-labels-idx1-ubyte.gz"), []uint32{20}, func(int) byte { return 11 })
	all = failures(t, texts{folder + "/x.toml": text}, folder+"/x.toml")
	if len(all) != 1 || all[0].Key != "task.test_labels" || !strings.Contains(all[0].Reason, "label 11") {
		t.Errorf("%v", all)
	}
	// Keys that the data set misses are told at the task.
	short := strings.Replace(text, `test_labels  = "t10k-labels-idx1-ubyte.gz"`, "", 1)
	all = failures(t, texts{folder + "/x.toml": short}, folder+"/x.toml")
	if len(all) != 1 || all[0].Key != "task" || !strings.Contains(all[0].Reason, "test_labels is missing") {
		t.Errorf("%v", all)
	}
	// Two faults are two errors.
	text = strings.Replace(text, `data = "idx"`, "data = \"idx\"\ntrian = 3\nclasses = \"ten\"", 1)
	all = failures(t, texts{folder + "/x.toml": text}, folder+"/x.toml")
	if len(all) != 2 || all[0].Key != "task.trian" || all[1].Key != "task.classes" || all[0].Remedy != `did you mean "train"?` {
		t.Errorf("%v", all)
	}
}
