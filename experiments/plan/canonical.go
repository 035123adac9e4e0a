package plan

import (
	"fmt"
	"strings"

	"ulpine/trainer"
)

// The canonical texts are what run keys are made of. They hold every resolved
// choice that can change a bit of a run, and nothing else: no names of arms, no
// paths, no order of keys in a file. A change of their form makes every stored
// run unfindable, so they start with the version of the form.
const canonicalForm = "form 1"

// canonical is the resolved arm without its name: one line a rounding point that
// its network computes with, the loss scale, the training.
func (a *Arm) canonical(network *trainer.Network) string {
	var b strings.Builder
	fmt.Fprintln(&b, "arm", canonicalForm)
	canonicalArithmetic(&b, network, &a.Arithmetic)
	fmt.Fprintln(&b, "loss scale:", a.LossScale)
	fmt.Fprintln(&b, "training:", describeTraining(a.Training))
	for i := range a.Arithmetic.Stages {
		s := &a.Arithmetic.Stages[i]
		fmt.Fprintf(&b, "stage from %s\n", startText(s))
		canonicalArithmetic(&b, network, &s.Arm)
		fmt.Fprintln(&b, "loss scale:", describeLossScale(s.Arm.LossScale))
	}
	return b.String()
}

// canonicalArithmetic writes what holds at every point.
func canonicalArithmetic(b *strings.Builder, network *trainer.Network, arm *trainer.Arm) {
	fmt.Fprintln(b, "input:", inputText(arm))
	fmt.Fprintln(b, "loss.gradient:", arm.LossGradient)
	for i := range network.Layers {
		for _, id := range network.PointsOf(i) {
			canonicalPoint(b, i, id, &arm.Layers[i])
		}
	}
}

// canonicalPoint writes what a layer holds at one point.
func canonicalPoint(b *strings.Builder, i int, id trainer.PointID, a *trainer.Arithmetic) {
	points := a.At(id)
	if acc := statisticOf(id, a); isStatistic(id) {
		if acc != nil {
			fmt.Fprintf(b, "layer %d %s: %s\n", i, id, accumulateText(acc))
		}
		return
	}
	if len(points) == 0 && !isOuter(id) && !follows(id) && id != trainer.UpdateState {
		word := exactWord
		if isOperand(id) {
			word = reusedWord
		}
		fmt.Fprintf(b, "layer %d %s: %s\n", i, id, word)
	}
	for _, p := range points {
		fmt.Fprintf(b, "layer %d %s: %s", i, id, p)
		if acc := sumOf(id, a); acc != nil {
			fmt.Fprintf(b, " %s", acc.Order)
			if acc.Through32 {
				b.WriteString(" through binary32")
			}
		}
		b.WriteByte('\n')
	}
}

// TaskCanonical is what all arms of a replicate share besides its seed: the
// data as asked for, the network, and what is trained before the arms start.
func (p *Plan) TaskCanonical() string {
	var b strings.Builder
	fmt.Fprintln(&b, "task", canonicalForm)
	fmt.Fprintln(&b, "data:", p.Task.Canonical)
	fmt.Fprintln(&b, "input:", p.Network.Input)
	for i := range p.Network.Layers {
		fmt.Fprintf(&b, "layer %d: %s\n", i, p.Network.Layers[i].Name)
	}
	if p.Pretrain != nil {
		b.WriteString(p.Pretrain.Canonical)
	}
	if p.Start != nil {
		b.WriteString(p.Start.canonical())
	}
	return b.String()
}

// canonical is what a pretraining is made of.
func (pre *Pretrain) canonical(network *trainer.Network) string {
	as := Arm{Arithmetic: pre.Arithmetic, Training: pre.Training, LossScale: describeLossScale(pre.Arithmetic.LossScale)}
	return "pretrain data: " + pre.Task.Canonical + "\npretrain " + as.canonical(network)
}

// Canonical is the whole resolved plan: two plans with the same text ask the
// same question of the same runs. Title and question are words, not choices.
func (p *Plan) Canonical() string {
	var b strings.Builder
	fmt.Fprintln(&b, "plan", canonicalForm)
	b.WriteString(p.TaskCanonical())
	fmt.Fprintf(&b, "replicates: %d from seed %d\n", p.Replicates.Count, p.Replicates.FirstSeed)
	if every := p.Replicates.LookEvery; every > 0 {
		fmt.Fprintf(&b, "looks: every %d\n", every)
	}
	if p.Tuning != nil {
		fmt.Fprintf(&b, "tuning: %s\n", p.Tuning)
	}
	fmt.Fprintf(&b, "claim: %s within %g at confidence %g\n", p.Claim.Metric, p.Claim.Margin, p.Claim.Confidence)
	for i := range p.Arms {
		fmt.Fprintf(&b, "called %s: %s", p.Arms[i].Slug, p.Arms[i].Canonical)
	}
	for i := range p.Controls {
		fmt.Fprintf(&b, "control %s: %s", p.Controls[i].Slug, p.Controls[i].Canonical)
	}
	for _, c := range p.Contrasts {
		fmt.Fprintf(&b, "contrast: %s against %s within %g\n", c.Arm, c.Against, c.Margin)
	}
	return b.String()
}
