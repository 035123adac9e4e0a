package results

import (
	"math"
	"reflect"
	"testing"
)

// TestDiagnose: every epoch is counted, the last one's histogram is kept, and
// what is in no bar and no zero is not finite.
func TestDiagnose(t *testing.T) {
	early := PointFinding{
		Epoch: 1, Layer: 2, Name: "dense 5", Point: "forward.sum", Values: 9, Zeros: 2, Counts: Counts{Underflow: 3},
		Exponents: []ExponentCount{{-3, 1}, {0, 5}},
	}
	late := early
	late.Epoch, late.Exponents, late.Counts = 4, []ExponentCount{{-5, 7}}, Counts{}
	r := Run{Arm: "a", Replicate: 7, Findings: &Findings{Points: []PointFinding{early, late}}}
	d := Diagnose(&r)
	if len(d.Qualities) != 2 {
		t.Errorf("%d qualities of two findings", len(d.Qualities))
	}
	d.Qualities = nil // see TestQualities
	want := Diagnosis{
		Arm: "a", Replicate: 7,
		Histograms: []Histogram{{Layer: 2, Name: "dense 5", Point: "forward.sum", Epoch: 4, Lowest: -5, Counts: []uint64{7}, Zeros: 2}},
		Epochs: []EpochCounts{
			{PointCounts{2, "dense 5", "forward.sum", Counts{Underflow: 3}}, 1, 9},
			{PointCounts{2, "dense 5", "forward.sum", Counts{}}, 4, 9},
		},
	}
	if !reflect.DeepEqual(d, want) {
		t.Errorf("got %+v\nwant %+v", d, want)
	}
	r.Findings.Points = r.Findings.Points[:1]
	if h := Diagnose(&r).Histograms[0]; h.NotFinite != 1 || !reflect.DeepEqual(h.Counts, []uint64{1, 0, 0, 5}) || h.Lowest != -3 {
		t.Errorf("histogram %+v", h)
	}
	r.Findings = nil
	if d := Diagnose(&r); d.Histograms != nil || d.Epochs != nil {
		t.Errorf("a run that was not looked at: %+v", d)
	}
}

func TestDecibels(t *testing.T) {
	if d := Decibels(100, 1); d != 20 || !math.IsInf(Decibels(1, 0), 1) || !math.IsNaN(Decibels(0, 0)) {
		t.Errorf("a ratio of 100 is %v dB", d)
	}
}
