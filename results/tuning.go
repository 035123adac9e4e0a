package results

import "strings"

// Tuning says how the learning rate and the loss scale of every arm were chosen
// before the reported replicates were run: from one list for all arms, by a metric
// on validation data, on seeds of their own.
type Tuning struct {
	Metric     string `json:"metric"` // of the choice: "validation accuracy"
	Replicates int    `json:"replicates"`
	FirstSeed  uint64 `json:"first_seed"`
	// LearningRates and LossScales are the values tried, in the order of the plan;
	// empty: not tuned. Every arm tries each with each.
	LearningRates []string   `json:"learning_rates"`
	LossScales    []string   `json:"loss_scales"`
	Runs          int        `json:"runs"`   // that the tuning asks for; arms with equal arithmetic share theirs
	Stored        int        `json:"stored"` // of those
	Done          bool       `json:"done"`   // every arm has its choice
	Arms          []TunedArm `json:"arms"`   // the baseline first
}

// TunedArm is what one arm tried and which trial it was given.
type TunedArm struct {
	Arm    string  `json:"arm"`    // slug
	Chosen int     `json:"chosen"` // index in Trials; -1: tuning is not finished
	Trials []Trial `json:"trials"`
	// Edge: the chosen learning rate is the least or the largest of three or more
	// that were tried, so that one beyond might do better.
	Edge bool `json:"edge"`
}

// Trial is one pair of values that was tried. A run that diverged counts as worse
// than any that did not.
type Trial struct {
	LearningRate string    `json:"learning_rate"` // in words
	LossScale    string    `json:"loss_scale"`
	N            int       `json:"n"` // runs stored
	Diverged     int       `json:"diverged"`
	Scores       []float64 `json:"-"` // the metric, one a stored run by ascending seed
	Mean         float64   `json:"-"` // of the runs that did not diverge; NaN: there is none
}

// Chosen says which values were chosen, arms with the same ones in one line, in
// the order of their first arms, each called by name: "learning rate 0.02, loss scale none: baseline, bf16".
func (t *Tuning) Chosen(name func(slug string) string) (lines []string) {
	var values []string
	arms := map[string][]string{}
	for i := range t.Arms {
		a := &t.Arms[i]
		if a.Chosen < 0 {
			continue
		}
		var words []string
		if len(t.LearningRates) > 0 {
			words = append(words, "learning rate "+a.Trials[a.Chosen].LearningRate)
		}
		if len(t.LossScales) > 0 {
			words = append(words, "loss scale "+a.Trials[a.Chosen].LossScale)
		}
		value := strings.Join(words, ", ")
		if arms[value] == nil {
			values = append(values, value)
		}
		arms[value] = append(arms[value], name(a.Arm))
	}
	for _, v := range values {
		lines = append(lines, v+": "+strings.Join(arms[v], ", "))
	}
	return lines
}
