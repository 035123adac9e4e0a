package plan

import (
	"ulpine/trainer"
)

// Plan is a plan checked and fully resolved: nothing in it is left to a default.
type Plan struct {
	Title, Question string
	File            string // as the caller named it
	Text            string // as written, included fragments first come behind it

	Task        Task
	Network     trainer.Network
	Training    trainer.Training // what the arms share; an arm may override some of it
	Diagnostics Diagnostics      // of all runs
	Predictions Predictions      // whether runs keep them
	Pretrain    *Pretrain        // nil: every arm starts from initial weights
	Start       *Start           // or from these; nil: not
	Replicates  Replicates
	Claim       Claim
	Tuning      *Tuning // nil: learning rates and loss scales are as the plan spells them

	Arms      []Arm // the baseline first, then in the order of the plan, those of grids last
	Grids     []Grid
	Controls  []Arm // the baseline otherwise computed, for the noise floor; no arms
	Contrasts []Contrast

	Warnings []string // doubts that travel into the report; those about data are the Task's
	Notices  []string // for the terminal only: where the plan was read from
}

// Baseline is the arm that all others are compared with.
func (p *Plan) Baseline() *Arm { return &p.Arms[0] }

// Runs is the number of runs the plan asks for; controls, pretraining and tuning
// included.
func (p *Plan) Runs() int {
	each := len(p.Arms) + len(p.Controls)
	if p.Pretrain != nil {
		each++
	}
	runs := each * p.Replicates.Count
	if p.Tuning != nil {
		runs += p.TuningPlan().Runs()
	}
	return runs
}

// Replicates are the repetitions of every arm: replicate i has the seed
// FirstSeed + i, i from 0.
type Replicates struct {
	Count     int // the most of them, with looks
	FirstSeed uint64
	LookEvery int // a look after every so many may end the plan; 0: all are run
}

// Claim is what the plan's author fixes before the first run.
type Claim struct {
	Metric     string  // "test accuracy"
	Margin     float64 // the loss of the metric that is accepted, > 0
	Confidence float64 // of the two-sided interval, in (0.5, 1)
}

// Contrast asks for a comparison of two arms with each other.
type Contrast struct {
	Arm, Against string // slugs
	Margin       float64
}

// Pretrain is a training done once a replicate under the baseline's arithmetic,
// from whose final weights every arm of the replicate starts.
type Pretrain struct {
	Task       Task
	Training   trainer.Training
	Arithmetic trainer.Arm // the baseline's, for this training's optimizer
	Canonical  string      // what is run, for the key of its runs
}

// Arm is one full assignment of arithmetic to rounding points.
type Arm struct {
	Name, Slug string
	Baseline   bool

	Arithmetic trainer.Arm
	Training   trainer.Training // the plan's with this arm's overrides
	Overrides  []string         // what the overrides change, in words
	Grid       string           // title of the grid it comes from; empty: spelt out
	Axes       []Coordinate     // its place there
	Settings   []Setting        // one row a rounding point of each layer
	Stages     []Stage          // what they change to on the way
	Summary    string           // the settings in one line, as the plan spells them
	LossScale  string           // in words
	// Canonical is the resolved arm without its name: equal texts mean equal
	// bits of every run, so it stands in the key of a run.
	Canonical string

	assignment *assignment // which setting holds where
}

// Setting is one rounding point of one layer as resolved, for tables and strips.
type Setting struct {
	Layer    int    // -1: input or loss
	Name     string // of the layer
	Point    string // "forward.weight"
	Format   string // canonical name; "exact" for a product that is not rounded
	Exponent int    // bits
	Fraction int
	Bits     int
	Rounding string // "nearest-even", "stochastic r=16 truncated", "exact", "reused"
	Order    string // sums: "sequential", "chunk(64)"
	Overflow string
}
