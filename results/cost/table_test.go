package cost

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"testing"
	"unicode/utf8"
)

func render(t testing.TB, r *Result, detail bool) string {
	t.Helper()
	var b strings.Builder
	if err := Table(&b, r, detail); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestTable: the answer first, then tables with a row an arm, then cautions and
// assumptions; columns line up, lines stay short, marks are explained.
func TestTable(t *testing.T) {
	n := convolutions()
	r := estimate(t, n, "microcontroller-2011", everyArm(t, &n)...)
	plain, detailed := render(t, r, false), render(t, r, true)
	if !strings.HasPrefix(strings.ReplaceAll(plain, "\n", " "), r.Answer) {
		t.Errorf("the answer is not first:\n%s", plain)
	}
	order := []string{
		"Bits a value", "Memory\n", "each tensor moved once a phase", "An inference of 1 example",
		"in blocks through a cache of 128 B", "~ extrapolated", "Cautions", "Assumptions",
		"horowitz-2014", "(2014-02)",
	}
	at := 0
	for _, s := range order {
		i := strings.Index(plain[at:], s)
		if i < 0 {
			t.Fatalf("%q is missing or out of order:\n%s", s, plain)
		}
		at += i
	}
	once, tiled := &r.Reference.Once, &r.Reference.Tiled
	if once.Step.Total.Bits == tiled.Step.Total.Bits || once.Inference.Total.Bits == tiled.Inference.Total.Bits {
		t.Fatal("the two models agree, the captions are not tested")
	}
	for caption, a := range map[string]*Activity{
		"A training step of 32 examples on microcontroller-2011, each tensor moved once a phase":     &once.Step,
		"An inference of 1 example on microcontroller-2011, each tensor moved once a phase":          &once.Inference,
		"A training step of 32 examples on microcontroller-2011, in blocks through a cache of 128 B": &tiled.Step,
		"An inference of 1 example on microcontroller-2011, in blocks through a cache of 128 B":      &tiled.Inference,
	} {
		_, section, _ := strings.Cut(plain, caption+"\n")
		section, _, _ = strings.Cut(section, "\n\n")
		if want := "fp32 " + bytesOf(a.Total.Bits) + " 1.000 "; !strings.Contains(strings.Join(strings.Fields(section), " "), want) {
			t.Errorf("under %q no %q:\n%s", caption, want, section)
		}
	}
	for _, arm := range r.Arms[1:] { // the first is called like the reference
		if got := strings.Count(plain, "\n  "+arm.Name+"  "); got != 6 {
			t.Errorf("%s has %d rows, want 6", arm.Name, got)
		}
		for _, s := range []string{": bytes of a step by class and phase", ": a step by layer", ": energy by use"} {
			if !strings.Contains(detailed, "\n"+arm.Name+s+"\n") {
				t.Errorf("no %q of %s", s, arm.Name)
			}
		}
	}
	for line := range strings.Lines(detailed) {
		line = strings.TrimSuffix(line, "\n")
		if utf8.RuneCountInString(line) > 110 || strings.HasSuffix(line, " ") {
			t.Errorf("line of %d characters: %q", utf8.RuneCountInString(line), line)
		}
	}
	aligned(t, plain)
}

// aligned: in a table every row ends in the same column, or earlier by what the
// head leaves out.
func aligned(t *testing.T, text string) {
	t.Helper()
	length, fp32 := 0, false
	for line := range strings.Lines(text) {
		line = strings.TrimSuffix(line, "\n")
		switch {
		case strings.HasPrefix(line, "  fp32 "):
			length, fp32 = utf8.RuneCountInString(line), true
		case !strings.HasPrefix(line, "  "):
			fp32 = false
		case fp32 && utf8.RuneCountInString(line) != length:
			t.Errorf("row of %d characters under one of %d: %q", utf8.RuneCountInString(line), length, line)
		}
	}
}

// TestRows holds two rows against what TestByHand and TestMasterByHand work out:
// in training (16 + 32 + 32 + 16) bits a parameter, and 16 bits of each kept
// activation (784 + 100 + 100 + 10 an example) and live gradient (100 + 100).
func TestRows(t *testing.T) {
	n := twoLayers()
	text := render(t, estimate(t, n, "cpu-core-2020", masterArm(t, &n, "bf16")), false)
	const params, acts, grads = 79510, 32 * 994, 32 * 200
	bits := (96*params + 16*(acts+grads)) / float64(4*params+acts+grads)
	for _, want := range [][]string{
		{"bf16 storage, fp32 master", "16.00", "16.00", "16.00", "32.00", "32.00", width(bits)},
		{"fp32", "32.00", "32.00", "32.00", "32.00", "-", "32.00"},
		{"bf16 storage, fp32 master", "2.08 MB", "0.810"}, // 243796 values of 2 bytes, 397550 of 4
		{"bf16 storage, fp32 master", "161 kB", "0.500"},  // 79510 + 784 + 300 + 110 values
		// dense 100: (32 78400 + 3200) / 48e9 s forward and again for the weight
		// gradient, 5 78500 4 / 51.2e9 s for the update, 52.33 + 52.33 + 30.66 µs;
		// dense 10 likewise 0.67 + 0.67 + 0.67 + 0.39; ReLU 1.25, loss 0.05 of traffic.
		{"fp32", "2.57 MB", "1.000", "139 µs", "1.00", "arithmetic"},
	} {
		if !strings.Contains(strings.Join(strings.Fields(text), " "), strings.Join(want, " ")) {
			t.Errorf("no row %q in\n%s", want, text)
		}
	}
}

// TestAnswers: what the sentence says in each case.
func TestAnswers(t *testing.T) {
	n := twoLayers()
	for _, c := range []struct {
		arms []Arm
		want []string
	}{
		{nil, []string{"No arms to compare", "2.57 MB"}},
		{[]Arm{uniform(t, &n, "fp64")}, []string{"No arm moves fewer bytes than FP32", "fp64 comes nearest with 2.000"}},
		{[]Arm{masterArm(t, &n, "fp32"), uniform(t, &n, "int8")}, []string{"int8 moves the fewest bytes: 0.250", "4.00 times as fast"}},
		{
			[]Arm{masterArm(t, &n, "bf16"), uniform(t, &n, "bf16")},
			[]string{"bf16 moves the fewest bytes: 0.500", "2.00 times as fast", "bound by memory", "by model"},
		},
	} {
		r := estimate(t, n, DefaultMachine, c.arms...)
		for _, s := range c.want {
			if !strings.Contains(r.Answer, s) {
				t.Errorf("answer %q lacks %q", r.Answer, s)
			}
		}
	}
}

// TestNoFaster: fewer bytes are no speed where arithmetic binds.
func TestNoFaster(t *testing.T) {
	n := twoLayers()
	r, err := Estimate(&Input{
		Network: n, Optimizer: Momentum, Batch: 32, Machine: slow(1e4), Energy: DefaultEnergy(),
		Arms: []Arm{uniform(t, &n, "bf16")},
	})
	if err != nil || !strings.Contains(r.Answer, "would run no faster than in FP32, bound by arithmetic") {
		t.Errorf("answer %q, error %v", r.Answer, err)
	}
}

// TestFits: where the reuse models agree the second table is one line, and a
// training that fits the cache is a warning.
func TestFits(t *testing.T) {
	n := twoLayers()
	r := estimate(t, n, DefaultMachine, uniform(t, &n, "bf16"))
	text := render(t, r, false)
	if !strings.Contains(text, "the same, no product needs a tensor twice") || strings.Count(text, "A training step") != 1 {
		t.Errorf("two equal tables:\n%s", text)
	}
	if len(r.Warnings) != 1 || !strings.Contains(r.Warnings[0], "fits the cache") {
		t.Errorf("warnings %q", r.Warnings)
	}
	r = estimate(t, n, "microcontroller-2011", uniform(t, &n, "bf16"))
	if len(r.Warnings) != 0 {
		t.Errorf("warnings %q", r.Warnings)
	}
}

// TestWords: the rules that a table chooses are told.
func TestWords(t *testing.T) {
	m := slow(1e9)
	m.Absent, m.RandomBits = AbsentWidth, 2e9
	r, err := Estimate(&Input{Network: twoLayers(), Optimizer: SGD, Batch: 1, Machine: m, Energy: DefaultEnergy()})
	if err != nil {
		t.Fatal(err)
	}
	text := render(t, r, false)
	for _, s := range []string{"hardware that may not exist", "drawn at 2.00 G/s", "made up for a test (2026-01)", "fp32 1.00 G/s", "not measurements"} {
		if !strings.Contains(strings.Join(strings.Fields(text), " "), s) {
			t.Errorf("%q is not said:\n%s", s, text)
		}
	}
}

// TestUnknownLayer: a layer that is no single product is warned of.
func TestUnknownLayer(t *testing.T) {
	n := Network{Layers: []Layer{{
		Name: "attention", Kind: "attention", Weights: 300, Inputs: 100, Outputs: 100,
		Work: Work{1234, 1234, 1234}, Terms: Work{10, 10, 10},
	}}}
	r := estimate(t, n, "microcontroller-2011")
	if len(r.Warnings) != 1 || !strings.Contains(r.Warnings[0], "layer 0 (attention)") {
		t.Errorf("warnings %q", r.Warnings)
	}
	if r.Reference.Once.Inference.Total.Multiplies != 1234 {
		t.Error("its products are not counted")
	}
}

// TestHostileNames: control characters of a name reach no terminal.
func TestHostileNames(t *testing.T) {
	n := twoLayers()
	arm := uniform(t, &n, "bf16")
	arm.Name = "bf16\x1b[31m\n\u202e\xff" + strings.Repeat("w", 200)
	text := render(t, estimate(t, n, DefaultMachine, arm), true)
	for _, bad := range []string{"\x1b", "\u202e", "\xff", "bf16\n"} {
		if strings.Contains(text, bad) {
			t.Errorf("%q in the output", bad)
		}
	}
}

type full struct{ left int }

var errFull = errors.New("disk full")

func (f *full) Write(p []byte) (int, error) {
	if f.left -= len(p); f.left < 0 {
		return 0, errFull
	}
	return len(p), nil
}

func TestWriteError(t *testing.T) {
	n := twoLayers()
	r := estimate(t, n, DefaultMachine)
	if err := Table(&full{200}, r, true); !errors.Is(err, errFull) {
		t.Errorf("error %v, want the writer's", err)
	}
}

func TestUnits(t *testing.T) {
	for _, c := range []struct {
		got, want string
	}{
		{bytesOf(8 * 999), "999 B"},
		{bytesOf(8 * 999400), "999 kB"},
		{bytesOf(8 * 999600), "1.00 MB"},
		{bytesOf(8 * 1234567), "1.23 MB"},
		{bytesOf(8 * 12345678), "12.3 MB"},
		{bytesOf(0), "0"},
		{bytesOf(4), "0.50 B"},
		{scaled(1.5e-9, 1, timeUnits), "1.50 ns"},
		{scaled(2e-15, 1, timeUnits), "0.002 ps"},
		{scaled(4.6e9, 1e-12, jouleUnit), "4.60 mJ"},
		{scaled(5e18, 1, counts), "5000000 T"},
		{significant(0.98765), "0.99"},
		{significant(9.999), "10.0"},
		{significant(99.96), "100"},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// ExampleEstimate prices 784-100-10 with everything in bfloat16, the update's
// state and master copy aside.
func ExampleEstimate() {
	n := twoLayers()
	bf16, _ := FormatNamed("bf16")
	arm := Uniform(&n, &Momentum, "bf16, fp32 update", bf16)
	for i := range arm.Layers {
		if n.Layers[i].Weights > 0 {
			arm.Layers[i].States = []Point{{Format: FP32}}
			arm.Layers[i].Step, arm.Layers[i].Master = Point{Format: FP32}, Point{Format: FP32}
		}
	}
	machine, _ := FindMachine(DefaultMachine)
	r, err := Estimate(&Input{
		Network: n, Optimizer: Momentum, Batch: 32, Arms: []Arm{arm}, Machine: machine, Energy: DefaultEnergy(),
	})
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		return
	}
	step := &r.Arms[0].Once.Step.Total
	fmt.Printf("%d bytes a step, %.3f of FP32; %.2f times as fast, %s binds\n",
		step.Bits/8, step.Against.Bits, step.Against.Speedup, step.Time.Binds)
	// Output: 2077792 bytes a step, 0.810 of FP32; 1.23 times as fast, memory binds
}
