package results

import (
	"fmt"
	"strings"
	"time"
)

// Claim is what a plan's author fixes before the first run: by which figure,
// within which margin, at which confidence and from how many replicates.
type Claim struct {
	Metric     string          `cbor:"1,keyasint" json:"metric"`
	Margin     float64         `cbor:"2,keyasint" json:"margin"`
	Confidence float64         `cbor:"3,keyasint" json:"confidence"`
	Count      int             `cbor:"4,keyasint" json:"count"`      // replicates
	FirstSeed  uint64          `cbor:"5,keyasint" json:"first_seed"` // choosing seeds afterwards is choosing results
	Contrasts  []ContrastClaim `cbor:"6,keyasint" json:"contrasts,omitempty"`
	// LookEvery is after how many replicates there is a look that may end the plan,
	// Count being the most; 0: there is none. It is left out of the hash then.
	LookEvery int `cbor:"7,keyasint,omitempty" json:"look_every,omitempty"`
	// Tuning is how learning rates and loss scales are chosen, in one line; empty:
	// they are spelt out.
	Tuning string `cbor:"8,keyasint,omitempty" json:"tuning,omitempty"`
}

// ContrastClaim is the claim of one contrast between two arms (slugs).
type ContrastClaim struct {
	Arm     string  `cbor:"1,keyasint" json:"arm"`
	Against string  `cbor:"2,keyasint" json:"against"`
	Margin  float64 `cbor:"3,keyasint" json:"margin"`
}

// FixedClaim is a claim as a store holds it.
type FixedClaim struct {
	Claim Claim     `json:"claim"`
	Hash  Hash      `json:"hash"`
	Fixed time.Time `json:"fixed"`
	// RunsBefore counts runs of the study's arms (its baseline aside) that were
	// in the store already when the claim was fixed: results its author may
	// have seen.
	RunsBefore int `json:"runs_before"`
	// Earlier describes claims that other studies fixed over those same runs
	// and that differ from this one.
	Earlier []string `json:"earlier,omitempty"`
}

// Differences says in words how the claim now differs from the one before;
// empty when it does not.
func (before Claim) Differences(now Claim) string {
	var parts []string
	add := func(what string, a, b any) {
		if a != b {
			parts = append(parts, fmt.Sprintf("%s was %v, is %v", what, a, b))
		}
	}
	add("metric", before.Metric, now.Metric)
	add("margin", before.Margin, now.Margin)
	add("confidence", before.Confidence, now.Confidence)
	add("replicate count", before.Count, now.Count)
	add("first seed", before.FirstSeed, now.FirstSeed)
	add("look interval", describeLooks(before.LookEvery), describeLooks(now.LookEvery))
	add("tuning", orNone(before.Tuning), orNone(now.Tuning))
	add("list of contrasts", describe(before.Contrasts), describe(now.Contrasts))
	return strings.Join(parts, "; ")
}

func describeLooks(every int) string {
	if every == 0 {
		return "none"
	}
	return fmt.Sprintf("%d replicates", every)
}

func orNone(text string) string {
	if text == "" {
		return "none"
	}
	return text
}

func describe(contrasts []ContrastClaim) string {
	if len(contrasts) == 0 {
		return "none"
	}
	words := make([]string, len(contrasts))
	for i, c := range contrasts {
		words[i] = fmt.Sprintf("%s against %s within %v", c.Arm, c.Against, c.Margin)
	}
	return strings.Join(words, ", ")
}
