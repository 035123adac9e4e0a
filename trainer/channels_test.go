package trainer

import (
	"context"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/random"
)

// TestChannelsAreRoundedApart holds inputs of three channels, two of them stochastic,
// to roundings in exact rationals, in training and in an evaluation in two batches.
func TestChannelsAreRoundedApart(t *testing.T) {
	const channels, inner, examples = 3, 5, 100
	judges := []judgeOf{splitJudge(t, 8, 2, 7), splitJudge(t, 5, 3, 0), splitJudge(t, 8, 4, 12)}
	arm := baseline(t, 2)
	arm.Channels = []quant.Point{stochastic(t, "E8M2", 7), point(t, "E5M3"), stochastic(t, "E8M4", 12)}
	job := Job{Network: network(t, []int{channels, inner}, "flatten", "dense 4"), Arm: arm, Training: sgdTraining(examples, 1), Train: dataset(examples, []int{channels, inner}, 4, 1), Seed: 9}
	e := engineFor[float32](t, &job)
	x := job.Train.Inputs.Float32s()
	check := func(p *pass, rows []float32) {
		t.Helper()
		e.takeInputs(p, rows)
		moved := 0
		for n, got := range e.edges[0].values(p.samples) {
			whole := int(p.first)*channels*inner + n
			d := quant.Draws{Seed: random.Derive(9, random.RoundingBits), Step: p.step, Site: 1, Phase: p.phase}
			want := judges[n/inner%channels].round(rat(float64(rows[n])), d, whole)
			if float64(got) != want {
				t.Fatalf("element %d: %v, want %v", whole, got, want)
			}
			if got != rows[n] {
				moved++
			}
		}
		if moved < p.samples {
			t.Errorf("%d elements moved", moved)
		}
	}
	p := e.pass
	p.step, p.samples = 3, examples
	check(&p, x)
	evaluation := pass{seed: e.pass.seed, step: 1, phase: phaseTest, samples: 64}
	check(&evaluation, x[:64*channels*inner])
	evaluation.samples, evaluation.first = 36, 64
	check(&evaluation, x[64*channels*inner:])
}

// TestEqualChannelsAreOne: channels of the input's own point change no bit, looked at
// or not; others are counted at their own bounds.
func TestEqualChannelsAreOne(t *testing.T) {
	job := Job{Network: network(t, []int{6}, "dense 4"), Arm: storageArm(t, stochastic(t, "E4M3", 8), 1), Training: sgdTraining(7, 2), Train: dataset(30, []int{6}, 4, 1), Test: dataset(9, []int{6}, 4, 2), Seed: 9}
	plain := mustRun(t, job)
	for range 6 {
		job.Arm.Channels = append(job.Arm.Channels, job.Arm.Input)
	}
	job.Diagnostics = everyStep
	sameOutcome(t, mustRun(t, job), plain)

	narrow := point(t, "Q1.6")
	job.Arm.Channels[2], job.Arm.Channels[3] = point(t, "Q2.6"), narrow
	x := job.Train.Inputs.Float32s()
	for i := range x {
		x[i] *= 1.5
	}
	high := uint64(0)
	for i, v := range x {
		if v > 1-0x1p-7 && i%6 == 3 || v < -1-0x1p-7 && i%6 == 3 {
			high++
		}
	}
	out := mustRun(t, job)
	if got := out.Counters[0].Counts.Saturated; got != 2*high || high == 0 {
		t.Errorf("%d saturations counted, want %d", got, 2*high)
	}
	looked := uint64(0)
	for _, f := range out.Findings.Points {
		if f.Point == "input" {
			looked += f.Saturated
		}
	}
	if looked == 0 {
		t.Error("no saturation was seen")
	}
	job.Diagnostics = Diagnostics{}
	sameOutcome(t, mustRun(t, job), out)

	job.Arm.Channels = job.Arm.Channels[:5]
	if _, err := Run(context.Background(), job, nil); err == nil || !strings.Contains(err.Error(), "points for 5 channels, an example has the shape 6") {
		t.Errorf("%v", err)
	}
}
