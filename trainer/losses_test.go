package trainer

import (
	"math"
	"slices"
	"strings"
	"testing"

	"gorgonia.org/tensor"
)

// regressionSet draws n examples whose targets are linear in their inputs.
func regressionSet(n int, shape []int, outputs int, seed uint64) Set {
	s := dataset(n, shape, 2, seed)
	x, per := s.Inputs.Float32s(), volume(shape)
	y := make([]float32, n*outputs)
	for i := range y {
		row := x[i/outputs*per:][:per]
		y[i] = 2*row[i%outputs%per] - row[(i%outputs+1)%per] + 0.5
	}
	return Set{Inputs: s.Inputs, Targets: tensor.New(tensor.WithShape(n, outputs), tensor.WithBacking(y))}
}

// TestSlopesAreDerivatives holds every loss to central differences of itself.
func TestSlopesAreDerivatives(t *testing.T) {
	values := []float32{0.5, -0.25, 1}
	for _, training := range []Training{
		{}, {LabelSmoothing: 0.2}, {Loss: "mean-squared-error"}, {Loss: "huber"}, {Loss: "huber", HuberWidth: 0.3},
	} {
		r, err := findLoss(&training)
		if err != nil {
			t.Fatal(err)
		}
		of := target{label: 1, values: values}
		y := []float64{0.3, -1.7, 2.6}
		at := func(y []float64) float64 { return r.example(slices.Clone(y), of, nil) }
		slope := make([]float64, 3)
		if got := r.example(slices.Clone(y), of, slope); got != at(y) {
			t.Errorf("%+v: loss %v with slopes, %v without", training, got, at(y))
		}
		for c := range y {
			up, down := slices.Clone(y), slices.Clone(y)
			up[c] += 1e-6
			down[c] -= 1e-6
			if want := (at(up) - at(down)) / 2e-6; math.Abs(slope[c]-want) > 1e-8 {
				t.Errorf("%+v: slope %d is %v, difference %v", training, c, slope[c], want)
			}
		}
	}
}

// TestLossesByHand: values that a pencil gives.
func TestLossesByHand(t *testing.T) {
	y, of := []float64{2, 0, -3}, target{values: []float32{1, 0.5, 1}}
	if got := (squaredError{}).example(y, of, nil); got != (1+0.25+16)/2 {
		t.Errorf("squared: %v", got)
	}
	if got := (huber{1}).example(y, of, nil); got != 0.5+0.125+3.5 {
		t.Errorf("huber: %v", got)
	}
	// Equal logits: every class has probability 1/4 whatever is smoothed.
	if got := (crossEntropy{0.5}).example(make([]float64, 4), target{label: 2}, nil); math.Abs(got-math.Log(4)) > 1e-15 {
		t.Errorf("smoothed: %v", got)
	}
	off, on := crossEntropy{0.5}.targets(4)
	if off != 0.125 || on != 0.625 {
		t.Errorf("targets %v, %v", off, on)
	}
	s := &split{labels: []int32{0, 0, 0, 1}, n: 4}
	a, b := 0.75*0.75+0.25*0.25, 0.25*0.75+0.75*0.25
	if got, want := (crossEntropy{0.5}).constant(s, 2), -a*math.Log(a)-b*math.Log(b); math.Abs(got-want) > 1e-15 {
		t.Errorf("constant: %v, want %v", got, want)
	}
	values := &split{targets: []float32{1, 3, 8}, n: 3, outputs: 1}
	if got := (squaredError{}).constant(values, 1); got != (9.0+1+16)/6 {
		t.Errorf("constant: %v", got)
	}
}

// TestRegressionLearns: a linear target, by both losses, and what is reported.
func TestRegressionLearns(t *testing.T) {
	for _, loss := range []string{"mean-squared-error", "huber"} {
		net := network(t, []int{4}, "dense 2")
		training := sgdTraining(5, 60)
		training.Loss, training.Shuffle, training.EvaluateTest = loss, true, LastEpoch
		job := Job{
			Network: net, Arm: baseline(t, 1), Training: training, Seed: 2,
			Train: regressionSet(23, net.Input, 2, 1), Test: regressionSet(9, net.Input, 2, 2),
		}
		out := mustRun(t, job)
		last := out.Epochs[len(out.Epochs)-1]
		if last.TestRMSE > 1e-3 || last.TrainRMSE > 1e-2 || out.Stalled || out.Diverged != "" {
			t.Errorf("%s: RMSE %v, %v", loss, last.TrainRMSE, last.TestRMSE)
		}
		if !math.IsNaN(last.TestAccuracy) || !math.IsNaN(out.Epochs[0].TestRMSE) {
			t.Errorf("%s: %+v", loss, last)
		}
		// One output at a time, half the squared distance is the loss.
		if loss == "mean-squared-error" && math.Abs(last.TestLoss-last.TestRMSE*last.TestRMSE) > 1e-12 {
			t.Errorf("loss %v, RMSE %v", last.TestLoss, last.TestRMSE)
		}
		sameOutcome(t, mustRun(t, job), out)
	}
}

func TestRegressionErrors(t *testing.T) {
	net := network(t, []int{4}, "dense 2")
	training := sgdTraining(2, 1)
	training.Loss = "mean-squared-error"
	good := regressionSet(5, net.Input, 2, 1)
	nan := regressionSet(5, net.Input, 2, 1)
	nan.Targets.Float32s()[3] = float32(math.NaN())
	for _, c := range []struct {
		change func(j *Job)
		want   string
	}{
		{func(j *Job) { j.Train = dataset(5, net.Input, 2, 1) }, "labels, but no targets"},
		{func(j *Job) { j.Train.Targets = regressionSet(5, net.Input, 3, 1).Targets }, "do not fit the network's 2 outputs"},
		{func(j *Job) { j.Train.Targets = regressionSet(4, net.Input, 2, 1).Targets }, "do not hold 4 examples"},
		{func(j *Job) { j.Train = nan }, "a target of example 1 is NaN"},
		{func(j *Job) { j.Train = Set{} }, "no examples"},
		{func(j *Job) { j.Training.Loss = "" }, "no examples"},
		{func(j *Job) { j.Training.Loss = "hubert" }, "known: cross-entropy, mean-squared-error, huber"},
		{func(j *Job) { j.Training.LabelSmoothing = 0.1 }, "belongs to cross-entropy"},
		{func(j *Job) { j.Training.Loss, j.Training.HuberWidth = "huber", -1 }, "width of the huber loss is -1"},
		{func(j *Job) { j.Training.Loss, j.Training.LabelSmoothing = "cross-entropy", 1 }, "label smoothing is 1"},
	} {
		job := Job{Network: net, Arm: baseline(t, 1), Training: training, Train: good}
		c.change(&job)
		if _, err := job.check(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v, want %q", err, c.want)
		}
	}
}

func TestMissedFaults(t *testing.T) {
	nan := math.NaN()
	s := &Scores{
		//               sound                     faulty
		Alarm: []float64{-3, -2, -1, 0, 1, 2, 3, 4, 5, 6, 2.5, -5, 5.5, 7, nan},
		Truth: []int32{0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 2, 1, 1, 2},
	}
	for _, c := range []struct {
		share  float64
		missed uint64
	}{{0, 4}, {0.1, 3}, {0.19, 3}, {0.4, 2}, {1, 1}} {
		missed, faults, ok := s.MissedFaults(c.share)
		if missed != c.missed || faults != 5 || !ok {
			t.Errorf("share %v: %d of %d missed, want %d", c.share, missed, faults, c.missed)
		}
	}
	s.Alarm[9] = nan // a sound example without an answer is a false alarm
	if missed, _, _ := s.MissedFaults(0); missed != 5 {
		t.Errorf("%d missed", missed)
	}
	if _, _, ok := (&Scores{Alarm: []float64{1}, Truth: []int32{1}}).MissedFaults(0.1); ok {
		t.Error("no sound examples, and yet a rate")
	}
	// ln(e^1 + e^2) - 3; a shift of all outputs changes nothing.
	if got, want := alarmScore([]float64{3, 1, 2}), math.Log(math.E+math.E*math.E)-3; math.Abs(got-want) > 1e-15 || math.Abs(alarmScore([]float64{1003, 1001, 1002})-want) > 1e-12 {
		t.Errorf("score %v, want %v", got, want)
	}
	if alarmScore([]float32{1, float32(nan)}) == alarmScore([]float32{1, float32(nan)}) {
		t.Error("NaN has a score")
	}
	// Every number of false alarms up to a fifth, by the counting of single examples.
	s = &Scores{Classes: 3, Confusion: make([]uint64, 9), Unanswered: make([]uint64, 3)}
	for i := range 200 {
		s.Alarm, s.Truth = append(s.Alarm, float64(i*37%101)), append(s.Truth, int32(i*7%3))
		s.Confusion[int(i*7%3)*3+i%3]++
	}
	by := s.byClass()
	if sound := by.Examples[0]; by.Examples[0]+by.Examples[1]+by.Examples[2] != 200 || len(by.Missed) != int(sound)/5+1 {
		t.Fatalf("%+v", by)
	}
	for a, got := range by.Missed {
		want := uint64(200)
		for _, threshold := range s.Alarm { // the least number of misses of any threshold that is allowed
			raised, missed := 0, uint64(0)
			for i, score := range s.Alarm {
				if s.Truth[i] == 0 && score > threshold {
					raised++
				} else if s.Truth[i] != 0 && !(score > threshold) {
					missed++
				}
			}
			if raised <= a {
				want = min(want, missed)
			}
		}
		if got != want {
			t.Errorf("%d false alarms allowed: %d missed, want %d", a, got, want)
		}
	}
	out := mustRun(t, zooJob(t, 0, func(n int) Arm { return baseline(t, n) }))
	last := out.Epochs[len(out.Epochs)-1]
	if last.Test == nil || slices.Max(last.Test.Examples) == 0 {
		t.Errorf("answers by class: %+v", last)
	}
	if len(out.Test.Alarm) != 7 || len(out.Test.Truth) != 7 {
		t.Errorf("%d scores of 7 examples", len(out.Test.Alarm))
	}
}
