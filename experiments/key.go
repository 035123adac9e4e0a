package experiments

import (
	"cmp"
	"crypto/sha256"
	"fmt"
	"io"
	"slices"
	"strconv"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/trainer"
)

// hashed is the SHA-256 of a kind and some texts. Each text goes in behind its
// length in bytes as a decimal number and a colon, so that no two lists of texts
// have the same bytes.
func hashed(kind string, texts ...string) results.Hash {
	h := sha256.New()
	for _, text := range append([]string{"ulpine " + kind, strconv.Itoa(trainer.ArithmeticVersion)}, texts...) {
		fmt.Fprintf(h, "%d:", len(text))
		io.WriteString(h, text)
	}
	return results.Hash(h.Sum(nil))
}

func seedText(seed uint64) string { return strconv.FormatUint(seed, 10) }

// runKey is the key of an arm's run. pretraining is the key of the run whose
// weights it starts from, zero where there is none. The task's canonical text
// spells out data as asked for, network and pretraining.
func runKey(p *plan.Plan, a *plan.Arm, data results.Hash, seed uint64, pretraining results.Hash) results.Hash {
	texts := []string{a.Canonical, p.TaskCanonical(), data.String(), seedText(seed)}
	if p.Pretrain != nil {
		texts = append(texts, pretraining.String())
	}
	return hashed("run", texts...)
}

// pretrainKey is the key of a pretraining. It leaves out the task that follows,
// so that plans which go on differently share their pretraining.
func pretrainKey(p *plan.Plan, data results.Hash, seed uint64) results.Hash {
	network := fmt.Sprintln("input:", p.Network.Input)
	for i := range p.Network.Layers {
		network += fmt.Sprintf("layer %d: %s\n", i, p.Network.Layers[i].Name)
	}
	return hashed("pretraining", p.Pretrain.Canonical, network, data.String(), seedText(seed))
}

// requestOf names the data of one replicate before it is loaded: what was asked
// for and, if the data is drawn for each replicate, its seed. For data that is
// generated the arithmetic version vouches that the same request yields the same
// examples.
func requestOf(t *plan.Task, seed uint64) results.Hash {
	which := "every replicate"
	if t.PerReplicate {
		which = seedText(seed)
	}
	return hashed("data", t.Canonical, which)
}

// studyID identifies a plan's study: task, network, pretraining, and the arms
// with their names, in any order.
func studyID(p *plan.Plan) results.Hash {
	arms := slices.Clone(p.Arms)
	slices.SortFunc(arms, func(a, b plan.Arm) int { return cmp.Compare(a.Slug, b.Slug) })
	texts := []string{p.TaskCanonical(), p.Baseline().Slug}
	for i := range arms {
		texts = append(texts, arms[i].Slug, arms[i].Canonical)
	}
	return hashed("study", texts...)
}

// claimOf is the plan's claim as a store fixes it.
func claimOf(p *plan.Plan) results.Claim {
	c := results.Claim{
		Metric: p.Claim.Metric, Margin: p.Claim.Margin, Confidence: p.Claim.Confidence,
		Count: p.Replicates.Count, FirstSeed: p.Replicates.FirstSeed, LookEvery: p.Replicates.LookEvery,
	}
	if p.Tuning != nil {
		c.Tuning = p.Tuning.String()
	}
	for _, k := range p.Contrasts {
		c.Contrasts = append(c.Contrasts, results.ContrastClaim{Arm: k.Arm, Against: k.Against, Margin: k.Margin})
	}
	return c
}
