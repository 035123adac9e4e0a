package cost

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// everyArm is a set of arms that uses all that the model knows.
func everyArm(t testing.TB, n *Network) []Arm {
	wide := uniform(t, n, "e4m3")
	wide.Name = "exact sums"
	for i := range wide.Layers {
		for _, s := range []*Sums{&wide.Layers[i].Forward, &wide.Layers[i].InputGradient.Sums} {
			s.Order = Wide
		}
	}
	return []Arm{
		uniform(t, n, "fp32"), uniform(t, n, "bf16"), masterArm(t, n, "fp16"), uniform(t, n, "mxfp4"),
		stochasticArm(t, n), wide, uniform(t, n, "int8"), uniform(t, n, "fp64"),
	}
}

func allResults(t testing.TB) map[string]*Result {
	all := map[string]*Result{}
	for _, machine := range MachineNames() {
		for name, n := range map[string]Network{"dense": twoLayers(), "convolutions": convolutions()} {
			all[name+" on "+machine] = estimate(t, n, machine, everyArm(t, &n)...)
		}
	}
	return all
}

func activities(r *Result) map[string]*Activity {
	all := map[string]*Activity{}
	for _, b := range append([]*Bill{&r.Reference}, pointers(r.Arms)...) {
		for _, a := range []*Account{&b.Once, &b.Tiled} {
			all[fmt.Sprintf("%s, %s, step", b.Name, a.Reuse)] = &a.Step
			all[fmt.Sprintf("%s, %s, inference", b.Name, a.Reuse)] = &a.Inference
		}
	}
	return all
}

// TestConservation: the total is the sum over layers and the sum over phases,
// counts exactly, times and energies to rounding errors; bits are the sum of
// their classes, energies of their uses, times of what binds them.
func TestConservation(t *testing.T) {
	for where, r := range allResults(t) {
		for what, a := range activities(r) {
			byLayer, byPhase := idle(), idle()
			for i := range a.Layers {
				own := idle()
				for p := range a.Layers[i].Phases {
					own.add(&a.Layers[i].Phases[p].Figures)
				}
				equal(t, where+", "+what+", "+a.Layers[i].Name, &own, &a.Layers[i].Total)
				byLayer.add(&a.Layers[i].Total)
			}
			for p := range a.Phases {
				byPhase.add(&a.Phases[p].Figures)
			}
			equal(t, where+", "+what+", by layer", &byLayer, &a.Total)
			equal(t, where+", "+what+", by phase", &byPhase, &a.Total)
			consistent(t, where+", "+what, &a.Total)
		}
	}
}

func equal(t *testing.T, what string, a, b *Figures) {
	t.Helper()
	if a.Values != b.Values || a.Bits != b.Bits || a.Traffic != b.Traffic ||
		a.Multiplies != b.Multiplies || a.Additions != b.Additions || a.Random != b.Random {
		t.Errorf("%s: counts %+v, want %+v", what, a, b)
	}
	for _, pair := range [][2]any{{a.Time, b.Time}, {a.Energy, b.Energy}} {
		x, y := reflect.ValueOf(pair[0]), reflect.ValueOf(pair[1])
		for i := range x.NumField() {
			if x.Field(i).Kind() == reflect.Float64 && math.Abs(x.Field(i).Float()-y.Field(i).Float()) > 1e-12*y.Field(i).Float() {
				t.Errorf("%s: %s %v, want %v", what, x.Type().Field(i).Name, x.Field(i), y.Field(i))
			}
		}
	}
}

func consistent(t *testing.T, what string, f *Figures) {
	t.Helper()
	e, s := &f.Energy, &f.Time
	if f.Traffic.Total() != f.Bits {
		t.Errorf("%s: classes have %d bits, together %d", what, f.Traffic.Total(), f.Bits)
	}
	if !near(e.Total, e.Multiply+e.Add+e.Random+e.Operands+e.Cache+e.Memory) {
		t.Errorf("%s: energy %+v does not add up", what, e)
	}
	if !near(s.Seconds, s.BoundByArithmetic+s.BoundByMemory+s.BoundByRandom) {
		t.Errorf("%s: time %+v does not add up", what, s)
	}
	if s.Seconds < max(s.Arithmetic, s.Memory, s.Random)*(1-1e-12) || s.Seconds > (s.Arithmetic+s.Memory+s.Random)*(1+1e-12) {
		t.Errorf("%s: time %+v is outside its sides", what, s)
	}
}

// TestTiledAgainstOnce: blocks never move less than each tensor once, and no
// more in a larger cache; an endless cache moves exactly that.
func TestTiledAgainstOnce(t *testing.T) {
	for name, n := range map[string]Network{"dense": twoLayers(), "convolutions": convolutions()} {
		in := Input{
			Network: n, Optimizer: Momentum, Batch: 32, InferenceBatch: 3, Arms: everyArm(t, &n),
			Machine: slow(1e9), Energy: DefaultEnergy(),
		}
		before := map[string]uint64{}
		for _, cache := range []uint64{16, 64, 256, 1000, 4096, 30000, 1 << 20, 1 << 40} {
			in.Machine.Cache = cache
			r, err := Estimate(&in)
			if err != nil {
				t.Fatal(err)
			}
			for i := range r.Arms {
				b := &r.Arms[i]
				once, tiled := b.Once.Step.Total.Bits, b.Tiled.Step.Total.Bits
				if tiled < once {
					t.Errorf("%s, %s, %d bytes: %d bits in blocks, %d at least", name, b.Name, cache, tiled, once)
				}
				if last, ok := before[b.Name]; ok && tiled > last {
					t.Errorf("%s, %s: %d bits with a cache of %d bytes, %d with less", name, b.Name, tiled, cache, last)
				}
				if before[b.Name] = tiled; cache == 1<<40 && tiled != once {
					t.Errorf("%s, %s: %d bits in an endless cache, want %d", name, b.Name, tiled, once)
				}
			}
		}
	}
}

// TestResultIsData: a result survives JSON, holds no NaN or infinity, and is the
// same every time; the arguments are left as they were.
func TestResultIsData(t *testing.T) {
	for where, r := range allResults(t) {
		text, err := json.Marshal(r)
		if err != nil {
			t.Fatalf("%s: %v", where, err)
		}
		var back Result
		if err := json.Unmarshal(text, &back); err != nil {
			t.Fatalf("%s: %v", where, err)
		}
		if d := cmp.Diff(*r, back); d != "" {
			t.Errorf("%s: lost in JSON: %s", where, d)
		}
	}
	n := convolutions()
	a, b := estimate(t, n, DefaultMachine, everyArm(t, &n)...), estimate(t, n, DefaultMachine, everyArm(t, &n)...)
	if d := cmp.Diff(a, b); d != "" {
		t.Errorf("two estimates differ: %s", d)
	}
	if d := cmp.Diff(n, convolutions()); d != "" {
		t.Errorf("the network was altered: %s", d)
	}
}

// TestLabels: every account says model and source of its three kinds of
// figures; what is extrapolated is marked where it happens and says by which
// rule, and FP32 is not.
func TestLabels(t *testing.T) {
	for where, r := range allResults(t) {
		for _, b := range append([]*Bill{&r.Reference}, pointers(r.Arms)...) {
			for _, a := range []*Account{&b.Once, &b.Tiled} {
				for _, l := range []*Label{&a.TrafficLabel, &a.TimeLabel, &a.EnergyLabel} {
					if l.Model == "" || l.Source == "" || l.Extrapolated != (len(l.Rules) > 0) {
						t.Errorf("%s, %s: label %+v", where, b.Name, l)
					}
				}
				time, energy := false, false
				for _, f := range []*Figures{&a.Step.Total, &a.Inference.Total} {
					time, energy = time || f.Time.Extrapolated, energy || f.Energy.Extrapolated
				}
				if time != a.TimeLabel.Extrapolated || energy != a.EnergyLabel.Extrapolated {
					t.Errorf("%s, %s: figures and labels disagree on what is extrapolated", where, b.Name)
				}
			}
		}
		if r.Reference.Once.TimeLabel.Extrapolated || r.Reference.Once.EnergyLabel.Extrapolated {
			t.Errorf("%s: FP32 is marked as extrapolated", where)
		}
		// The arms whose every operation the energy table lists.
		listed := map[string]bool{"fp32": true, "int8": true, "fp16 storage, fp32 master": true}
		for _, b := range r.Arms {
			if b.Once.EnergyLabel.Extrapolated == listed[b.Name] {
				t.Errorf("%s: energy of %s extrapolated: %v", where, b.Name, b.Once.EnergyLabel.Extrapolated)
			}
		}
		if r.Arms[0].Once.Step.Total != r.Reference.Once.Step.Total {
			t.Errorf("%s: an arm with everything in FP32 is not the reference", where)
		}
	}
}
