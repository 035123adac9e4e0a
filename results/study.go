package results

import "time"

// VerdictKind is one of the four answers, and no other.
type VerdictKind uint8

// The verdicts.
const (
	Undecided VerdictKind = iota
	Within
	Worse
	Diverged
)

// Verdict answers one comparison.
type Verdict struct {
	Kind     VerdictKind
	Pairs    int // Undecided: about how many pairs would settle it; 0: cannot be said
	Diverged int // Diverged: k of Of
	Of       int
}

// FewForBCa: below this many pairs the BCa interval misses about twice as often as
// it says, as the simulation of package compare shows; the studentised bootstrap,
// which keeps nearly what it says, is told of in its place.
const FewForBCa = 20

// Comparison is one arm against another over paired replicates; a difference is
// arm - against, positive = better.
type Comparison struct {
	Arm, Against      string // slugs
	Metric            string
	Regression        bool // of a regression: its losses are no cross-entropies
	Margin            float64
	Confidence        float64
	Replicates        []uint64
	Differences       []float64 // one a replicate, same order
	N                 int
	Mean, SD          float64 // NaN when N is too small
	Low, High         float64 // two-sided t interval of the mean at Confidence
	BootLow, BootHigh float64 // bootstrap interval (BCa) beside it
	Skewness          float64
	P                 float64 // one-sided p-value against "not within the margin"
	Holm              float64 // Holm-adjusted P, the one that decides
	PWorse            float64 // one-sided p-value against "not worse than the margin"
	HolmWorse         float64 // Holm-adjusted PWorse
	Planned           int     // pairs the plan asks for, at most that many with looks; 0: unknown
	LookEvery         int     // a look after every so many pairs may decide early; 0: only the last one decides
	Verdict           Verdict
	Diverged          int // replicates that diverged in the arm
	AgainstDiverged   int // replicates that diverged in the arm it is compared with
	Stalled           int
	Same              bool // the two arms have the same arithmetic, and so the very same runs
	Headline          bool // a contrast the plan asks for, not arm against baseline
	Warnings          []string

	// Intervals at Confidence beside Low to High, NaN where there are none; an end
	// is infinite where the pairs are too few for one.
	StudentLow, StudentHigh float64 // of the mean, studentised bootstrap
	FlipLow, FlipHigh       float64 // of the centre of symmetric differences, by flipping signs
	Middle                  float64 // Hodges-Lehmann estimate of that centre
	RankLow, RankHigh       float64 // its interval, by signed ranks
	Offered                 string  // the interval to trust before the t interval; empty: no need

	// DivergedLow to DivergedHigh is the exact interval at Confidence of the share
	// of replicates that diverge; NaN without a pair.
	DivergedLow, DivergedHigh float64
	Classes                   []ClassDifference // differences of recall, when runs were counted by class
	Items                     *ItemComparison   // nil: predictions are not stored for every pair
}

// ClassDifference is how the recall of one class differs between two arms over
// paired replicates, positive = better: a share of one.
type ClassDifference struct {
	Class     int
	Name      string // empty: the class has none
	N         int    // pairs whose test data holds the class
	Mean      float64
	Low, High float64 // two-sided t interval at the comparison's confidence; NaN with N < 2
	Worst     float64 // the least difference
	Replicate uint64  // where it was found, the first one
	P         float64 // one-sided p-value against "the class does not lose"
	Holm      float64 // P adjusted for the number of classes
}

// Setting is one rounding point of one layer as resolved, for tables and strips.
type Setting struct {
	Layer    int    `json:"layer"` // -1: input or loss
	Name     string `json:"name"`
	Point    string `json:"point"` // "forward.weight"
	Format   string `json:"format"`
	Exponent int    `json:"exponent"` // bits, for the strip
	Fraction int    `json:"fraction"`
	Bits     int    `json:"bits"`
	Rounding string `json:"rounding"` // "nearest-even", "stochastic r=16 truncated", "exact"
	Order    string `json:"order"`    // sums: "sequential", "chunk(64)"
	Overflow string `json:"overflow"`
}

// Arm describes one arm of a study.
type Arm struct {
	Name, Slug string
	Baseline   bool
	Settings   []Setting
	Summary    string  // the arm's settings in one line, as the plan spells them
	Bits       float64 // mean bits of a stored value, weighted by tensor sizes
	LossScale  string
	Guilty     []string // points ("update.master") found to cause the arm's loss; empty: not looked for
	Grid       string   // the grid that the arm comes from; empty: the plan spells it out
	Axes       []Coordinate
}

// Study is everything a report says: the plan, its arms, their runs, the
// comparisons, and how to rerun them.
type Study struct {
	Title, Question string
	PlanFile        string
	PlanText        string // the plan as written
	Resolved        string // the plan fully spelt out
	Data            string // one line: what data, how many, invented or not
	Network         string // one line
	Training        string // one line
	LongestSum      int
	Metric          string
	Regression      bool // the task has targets of values, no classes
	Margin          float64
	Confidence      float64
	NoiseLow        float64    // noise floor: the range of the controls' differences from the baseline;
	NoiseHigh       float64    // both zero: not measured
	NoiseFrom       string     // where it comes from: "3 replicates in binary64 and with pairwise sums"
	MarginFixed     time.Time  // when the margin was written to the store
	MarginChanged   string     // not empty: the margin, metric or count was changed after the first run
	Claim           Claim      // what the plan claims now
	FixedClaim      FixedClaim // what was fixed before the first run
	Planned         int        // pairs the plan asks for
	BaselineProblem string     // not empty: the baseline diverged or failed, no verdict is to be had
	Arms            []Arm      // the baseline first
	Runs            []Run
	Comparisons     []Comparison // arms against the baseline, plan order
	Contrasts       []Comparison
	Classes         []string
	Warnings        []string
	Cautions        []string
	Looks           string // when pairs are looked at, and at which look it stopped; empty: all are asked for
	Answer          string // the sentence
	StoreDigest     string
	CodeVersion     string
	Rerun           []string // commands
	Costs           *Costs   // nil: not worked out
	Volumes         []Volume // of a run, by layer and point; empty: not known
	Ranges          []Range  // of the formats that histograms are held against
	Diagnoses       []Diagnosis
	Tuning          *Tuning // nil: learning rates and loss scales are those that the plan spells out
	Written         time.Time
}
