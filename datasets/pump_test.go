package datasets

import (
	"bytes"
	"encoding/hex"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/quant/elementary"
)

// rawWindows generates windows of one class in g.
func rawWindows(t *testing.T, p *PumpVibration, class pumpState, n int) [][]float64 {
	t.Helper()
	s := p.windows(pumpKey(p.DataSeed, 100), 0, n*len(pumpClasses))
	var out [][]float64
	for i, label := range s.labels {
		if pumpState(label) != class {
			continue
		}
		w := make([]float64, pumpSamples)
		for k := range w {
			w[k] = s.at(i*pumpSamples + k)
		}
		out = append(out, w)
	}
	return out
}

// power is |DFT|^2 (2/N)^2 at a frequency, by the definition: the squared
// amplitude of a sine of that frequency.
func power(x []float64, hertz float64) float64 {
	var re, im float64
	for n, v := range x {
		angle := twoPi * hertz / pumpRate * float64(n)
		re += v * elementary.Cos(angle)
		im -= v * elementary.Sin(angle)
	}
	scale := 2 / float64(len(x))
	return (re*re + im*im) * scale * scale
}

// meanPower averages power over windows.
func meanPower(windows [][]float64, hertz float64) float64 {
	sum := 0.0
	for _, w := range windows {
		sum += power(w, hertz)
	}
	return sum / float64(len(windows))
}

// peak returns the frequency of greatest mean power in [low, high), in steps of 10 Hz.
func peak(windows [][]float64, low, high float64) float64 {
	best, at := 0.0, 0.0
	for f := low; f < high; f += 10 {
		if p := meanPower(windows, f); p > best {
			best, at = p, f
		}
	}
	return at
}

func within(t *testing.T, what string, got, low, high float64) {
	t.Helper()
	if !(got >= low && got <= high) {
		t.Errorf("%s: %.5g, want %g to %g", what, got, low, high)
	}
}

// TestPumpSpectra looks for each state where the recipe puts it. A window is 50 ms
// long, so lines are 20 Hz wide and neighbours leak into each other: the bands are
// wide, but no state falls into another's.
func TestPumpSpectra(t *testing.T) {
	p := &PumpVibration{DataSeed: 1}
	const n = 300
	windows := map[pumpState][][]float64{}
	for s := sound; s <= cavitation; s++ {
		windows[s] = rawWindows(t, p, s, n)
	}
	// Shaft 22-30 Hz: an amplitude a gives power a^2 at its frequency, spread by
	// the shaft's variation, plus what leaks.
	ratio := func(s pumpState, f float64) float64 {
		return meanPower(windows[s], f) / meanPower(windows[sound], f)
	}
	// unbalance: a1 grows from about 0.25 to 0.82, power about tenfold.
	within(t, "unbalance at the shaft frequency", ratio(unbalance, 26), 6, 14)
	within(t, "unbalance, frequency of the peak", peak(windows[unbalance], 10, 1280), 20, 32)
	// misalignment: a2 from 0.08 to 0.5, a3 from 0.04 to 0.25.
	within(t, "misalignment at twice the shaft frequency", ratio(misalignment, 52), 6, 60)
	within(t, "misalignment at three times", ratio(misalignment, 78), 6, 60)
	within(t, "misalignment, frequency of the peak", peak(windows[misalignment], 40, 1280), 44, 60)
	// bearing: rings at 780 Hz; the noise floor of sound windows is flat there.
	within(t, "bearing at 780 Hz", ratio(bearing, 780), 5, 100)
	within(t, "bearing, frequency of the peak above 200 Hz", peak(windows[bearing], 200, 1280), 720, 840)
	within(t, "bearing at 1240 Hz, off the ring", ratio(bearing, 1240), 0.8, 4)
	// cavitation: a resonance at 560 Hz, broad (rho = 0.8).
	within(t, "cavitation at 560 Hz", ratio(cavitation, 560), 4, 100)
	within(t, "cavitation, frequency of the peak above 200 Hz", peak(windows[cavitation], 200, 1280), 440, 680)
	for s := unbalance; s <= misalignment; s++ {
		within(t, pumpClasses[s]+" at 780 Hz", ratio(s, 780), 0.8, 1.3)
	}
}

// TestPumpSoundAmplitude: E[(g a1)^2] of a sound window is 0.25^2 E[L^2] E[g^2] =
// 0.0625 x 1.03 x exp(2 x 0.15^2) = 0.0673; the total power of a window is half the
// sum of squared amplitudes plus the noise's: 0.0361 + 0.0144 x 1.03 x 1.046 =
// 0.0535 g^2, plus offset 0.05^2/3 and a converter step's 1/12.
func TestPumpSoundAmplitude(t *testing.T) {
	windows := rawWindows(t, &PumpVibration{DataSeed: 1}, sound, 2000)
	var sum, square float64
	for _, w := range windows {
		for _, x := range w {
			sum += x
			square += x * x
		}
	}
	n := float64(len(windows) * pumpSamples)
	const load2, gain2 = 1.03, 1.046 // E[L^2] = 1 + 0.6^2/12; E[g^2]
	want := load2*gain2*(0.0625+0.0064+0.0016)/2 + 0.0144*load2*gain2 + 0.0025/3
	within(t, "mean power of sound windows in g^2", square/n, 0.97*want, 1.03*want)
	within(t, "mean of sound windows in g", sum/n, -0.005, 0.005)
}

// TestPumpRemounted: the other mounting lowers the level by 0.6, moves the ring by
// 330 Hz and raises the noise.
func TestPumpRemounted(t *testing.T) {
	first := &PumpVibration{DataSeed: 1}
	second := &PumpVibration{DataSeed: 1, Variant: Remounted}
	a, b := rawWindows(t, first, bearing, 300), rawWindows(t, second, bearing, 300)
	within(t, "ring of the remounted sensor", peak(b, 200, 1280), 1050, 1170)
	within(t, "power at 780 Hz", meanPower(b, 780)/meanPower(a, 780), 0, 0.1)
	a, b = rawWindows(t, first, unbalance, 300), rawWindows(t, second, unbalance, 300)
	within(t, "power at the shaft frequency", meanPower(b, 26)/meanPower(a, 26), 0.34, 0.38)
	a, b = rawWindows(t, first, sound, 300), rawWindows(t, second, sound, 300)
	// Noise power: 0.36 x 1.69.
	within(t, "noise power at 1000 Hz", meanPower(b, 1000)/meanPower(a, 1000), 0.57, 0.65)
}

// TestPumpConverter: raw values lie on the converter's grid and inside its range,
// and most of its steps near zero occur.
func TestPumpConverter(t *testing.T) {
	p := &PumpVibration{Train: 500, DataSeed: 1, Scale: AsIs}
	d, err := p.Load(7)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[float32]bool{}
	for _, x := range d.Train.Inputs.Float32s() {
		if math.Floor(float64(x)*256) != float64(x)*256 || x > 2047.0/256 || x < -8 {
			t.Fatalf("%g is no reading of the converter", x)
		}
		seen[x] = true
	}
	if len(seen) < 200 {
		t.Errorf("only %d different readings", len(seen))
	}
	for _, c := range []struct{ x, want float64 }{
		{0, 0},
		{1.0 / 512, 1.0 / 256},
		{0.9 / 512, 0},
		{-1.1 / 512, -1.0 / 256},
		{100, 2047.0 / 256},
		{-100, -8},
	} {
		if got := convert(c.x); got != c.want {
			t.Errorf("convert(%g) = %g, want %g", c.x, got, c.want)
		}
	}
}

// TestPumpImpacts: the ring of an impact starts at zero, decays with 2.2 ms and is
// over after 6 tau; the train is stationary from the first sample on.
func TestPumpImpacts(t *testing.T) {
	windows := rawWindows(t, &PumpVibration{DataSeed: 3}, bearing, 3000)
	energy := make([]float64, 4)
	for _, w := range windows {
		for n, x := range w {
			energy[n/32] += x * x
		}
	}
	mean := (energy[0] + energy[1] + energy[2] + energy[3]) / 4
	for i, e := range energy {
		within(t, "energy of quarter "+string(rune('1'+i)), e/mean, 0.97, 1.03)
	}
	windows = rawWindows(t, &PumpVibration{DataSeed: 3}, cavitation, 3000)
	clear(energy)
	for _, w := range windows {
		for n, x := range w {
			energy[n/32] += x * x
		}
	}
	mean = (energy[0] + energy[1] + energy[2] + energy[3]) / 4
	for i, e := range energy {
		within(t, "energy of cavitation, quarter "+string(rune('1'+i)), e/mean, 0.95, 1.05)
	}
}

func loadPump(t *testing.T, p *PumpVibration, seed uint64) *Data {
	t.Helper()
	d, err := p.Load(seed)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// TestPumpGolden pins every bit of a small draw of each variant. Recorded from
// this code; the tests above say that it is right.
func TestPumpGolden(t *testing.T) {
	for _, c := range []struct{ variant, want string }{
		{Mounted, goldenMounted},
		{Remounted, goldenRemounted},
	} {
		p := &PumpVibration{Train: 200, Validation: 50, Test: 100, DataSeed: 1, Variant: c.variant}
		d := loadPump(t, p, 100)
		if got := hex.EncodeToString(d.Hash[:]); got != c.want {
			t.Errorf("%s: hash %s, want %s", c.variant, got, c.want)
		}
		again := loadPump(t, p, 100)
		if d.Hash != again.Hash || !slices.Equal(d.Train.Inputs.Float32s(), again.Train.Inputs.Float32s()) {
			t.Errorf("%s: a second draw differs", c.variant)
		}
	}
}

// TestPumpCounts: window i of a split does not change with the sizes of the sets,
// splits and seeds differ, classes are equal.
func TestPumpCounts(t *testing.T) {
	small := loadPump(t, &PumpVibration{Train: 10, Validation: 5, Test: 15, DataSeed: 1, Scale: AsIs}, 100)
	large := loadPump(t, &PumpVibration{Train: 200, Validation: 50, Test: 30, DataSeed: 1, Scale: AsIs}, 100)
	for i, pair := range [][2]Set{{small.Train, large.Train}, {small.Validation, large.Validation}, {small.Test, large.Test}} {
		a, b := pair[0].Inputs.Float32s(), pair[1].Inputs.Float32s()
		if !slices.Equal(a, b[:len(a)]) || !slices.Equal(pair[0].Labels, pair[1].Labels[:pair[0].Len()]) {
			t.Errorf("split %d: examples change with the sizes of the sets", i)
		}
	}
	windows := map[string]string{}
	for name, s := range map[string]Set{
		"training": large.Train, "validation": large.Validation, "test": large.Test,
		"other replicate": loadPump(t, &PumpVibration{Train: 100, DataSeed: 1, Scale: AsIs}, 101).Train,
		"other data seed": loadPump(t, &PumpVibration{Train: 100, DataSeed: 2, Scale: AsIs}, 100).Train,
		// Neither the sum nor the exclusive or of the seeds may be what counts.
		"seeds exchanged": loadPump(t, &PumpVibration{Train: 100, DataSeed: 100, Scale: AsIs}, 1).Train,
	} {
		x := s.Inputs.Float32s()
		for i := range s.Len() {
			var b strings.Builder
			for _, v := range x[i*pumpSamples:][:pumpSamples] {
				b.WriteByte(byte(int(v * 256)))
			}
			if other, twice := windows[b.String()]; twice {
				t.Errorf("a window occurs in %s and %s", name, other)
			}
			windows[b.String()] = name
		}
	}
	counts := make([]int, 5)
	for _, label := range large.Train.Labels {
		counts[label]++
	}
	if !slices.Equal(counts, []int{40, 40, 40, 40, 40}) {
		t.Errorf("classes of 200 windows: %v", counts)
	}
}

// TestPumpScale: the training set has mean 0 and deviation 1, the others nearly.
func TestPumpScale(t *testing.T) {
	d := loadPump(t, &PumpVibration{Train: 1000, Test: 500, DataSeed: 1}, 100)
	stats := func(s Set) (mean, std float64) {
		x := s.Inputs.Float32s()
		for _, v := range x {
			mean += float64(v) / float64(len(x))
		}
		for _, v := range x {
			std += (float64(v) - mean) * (float64(v) - mean) / float64(len(x))
		}
		return mean, math.Sqrt(std)
	}
	mean, std := stats(d.Train)
	within(t, "training mean", mean, -1e-6, 1e-6)
	within(t, "training deviation", std, 1-1e-6, 1+1e-6)
	mean, std = stats(d.Test)
	within(t, "test mean", mean, -0.03, 0.03)
	within(t, "test deviation", std, 0.93, 1.07)
	if len(d.Mean) != 1 || len(d.Std) != 1 {
		t.Errorf("statistics %v, %v: want one of each", d.Mean, d.Std)
	}
	// Scaled values are the binary32 numbers nearest to (x - mean)/std.
	raw := loadPump(t, &PumpVibration{Train: 1000, Test: 500, DataSeed: 1, Scale: AsIs}, 100)
	for i, x := range raw.Test.Inputs.Float32s() {
		if want := float32((float64(x) - d.Mean[0]) / d.Std[0]); want != d.Test.Inputs.Float32s()[i] {
			t.Fatalf("value %d: %g, want %g", i, d.Test.Inputs.Float32s()[i], want)
		}
	}
}

// TestPumpFacts: facts agree with what is loaded, and say that data are invented.
func TestPumpFacts(t *testing.T) {
	p := &PumpVibration{Train: 33, Test: 7, DataSeed: 1}
	f, err := p.Facts()
	if err != nil {
		t.Fatal(err)
	}
	d := loadPump(t, p, 1)
	if f.Train != d.Train.Len() || f.Validation != d.Validation.Len() || f.Test != d.Test.Len() || !slices.Equal(f.Shape, d.Shape) {
		t.Errorf("facts %+v differ from the data", f)
	}
	if !slices.Equal(d.Train.Inputs.Shape(), []int{33, 1, 128}) || d.Validation.Inputs != nil {
		t.Errorf("shape %v", d.Train.Inputs.Shape())
	}
	if !strings.Contains(f.Description, "invented") || !strings.Contains(d.Description, "invented") || !f.PerReplicate {
		t.Errorf("description %q must say invented", f.Description)
	}
	if bytes.Contains([]byte(p.Canonical()), []byte("\n")) || !strings.Contains(p.Canonical(), "variant=mounted") {
		t.Errorf("canonical %q", p.Canonical())
	}
}

// TestPumpBadFields: a literal's fault is told by the key of its field.
func TestPumpBadFields(t *testing.T) {
	for _, c := range []struct {
		p   PumpVibration
		key string
	}{
		{PumpVibration{}, "train"},
		{PumpVibration{Train: 1, Validation: -1}, "validation"},
		{PumpVibration{Train: 1, Test: maxExamples + 1}, "test"},
		{PumpVibration{Train: 1, Variant: "sideways"}, "variant"},
		{PumpVibration{Train: 1, Scale: UnitRange}, "scale"},
	} {
		_, err := c.p.Load(1)
		wantOptionError(t, err, c.key)
		_, err = c.p.Facts()
		wantOptionError(t, err, c.key)
	}
}

func BenchmarkPump(b *testing.B) {
	p := &PumpVibration{Train: 500, DataSeed: 1}
	for b.Loop() {
		if _, err := p.Load(1); err != nil {
			b.Fatal(err)
		}
	}
}

const (
	goldenMounted   = "2bfd7be214a50c1c2e07bc9a90e7eb74fd483d4a22aa9e8bafb819835a3d4365"
	goldenRemounted = "de236b1fae1e36e48023e115a465960532fa5266471c24110b8054e61f968821"
)
