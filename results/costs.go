package results

// Costs is what the arms of a study would cost on hardware that has their
// formats: figures of a model, never measurements. Bits are exact counts.
type Costs struct {
	Machine     string   `json:"machine"` // the table's name, source and date
	Energy      string   `json:"energy"`  // likewise
	Answer      string   `json:"answer"`
	Batch       uint64   `json:"batch"`     // examples of a training step
	Reference   Bill     `json:"reference"` // everything in FP32
	Bills       []Bill   `json:"bills"`     // of the arms, in the plan's order
	Assumptions []string `json:"assumptions"`
	Cautions    []string `json:"cautions"`
	Warnings    []string `json:"warnings,omitempty"`
	Rules       []string `json:"rules,omitempty"` // that stood in for rows which the tables lack
}

// Bill is the cost of one arm.
type Bill struct {
	Arm            string `json:"arm"`           // slug
	TrainingBits   uint64 `json:"training_bits"` // kept in memory while training
	EndpointBits   uint64 `json:"endpoint_bits"` // kept in memory for an inference
	Step           Charge `json:"step"`          // each tensor read or written once a phase
	StepTiled      Charge `json:"step_tiled"`    // products in blocks through a cache
	Inference      Charge `json:"inference"`
	InferenceTiled Charge `json:"inference_tiled"`
}

// Charge is the cost of one training step or of one inference.
type Charge struct {
	Bits        uint64  `json:"bits"` // moved between memory and cache, of which:
	Weights     uint64  `json:"weights"`
	Activations uint64  `json:"activations"`
	Gradients   uint64  `json:"gradients"`
	State       uint64  `json:"optimizer_state"`
	Master      uint64  `json:"master_copy"`
	Random      uint64  `json:"random_bits"`
	Seconds     float64 `json:"seconds"`
	Binds       string  `json:"binds"` // what most of the time is spent waiting for
	Picojoules  float64 `json:"picojoules"`
	// Against the same in FP32: shares of bits and energy, and the speed-up.
	BitShare    float64 `json:"bit_share"`
	Speedup     float64 `json:"speed_up"`
	EnergyShare float64 `json:"energy_share"`
	// The tables lacked a row, and the model's stated rule stood in.
	TimeExtrapolated   bool `json:"time_extrapolated"`
	EnergyExtrapolated bool `json:"energy_extrapolated"`
}
