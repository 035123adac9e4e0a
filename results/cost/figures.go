package cost

// Activity is a training step or an inference: its figures by phase, by layer
// and in total. The sums over phases and over layers are the total.
type Activity struct {
	Phases []PhaseFigures `json:"phases"`
	Layers []LayerFigures `json:"layers"` // last the loss
	Total  Figures        `json:"total"`
}

// PhaseFigures are the figures of one phase.
type PhaseFigures struct {
	Phase Phase `json:"phase"`
	Figures
}

// LayerFigures are the figures of one layer; index -1 is the loss.
type LayerFigures struct {
	Layer  int            `json:"layer"`
	Name   string         `json:"name"`
	Kind   string         `json:"kind"`
	Phases []PhaseFigures `json:"phases"`
	Total  Figures        `json:"total"`
}

// Figures are the costs of a piece of work.
type Figures struct {
	Values     uint64  `json:"values"`  // moved between memory and cache
	Bits       uint64  `json:"bits"`    // they take
	Traffic    ByClass `json:"traffic"` // Bits by class
	Multiplies uint64  `json:"multiplies"`
	Additions  uint64  `json:"additions"`
	Random     uint64  `json:"random_bits"` // drawn
	Time       Time    `json:"time"`
	Energy     Energy  `json:"energy"`
	Against    Against `json:"against_fp32"`
}

// Against sets figures beside those of the same work in FP32; all ones where
// there is nothing to do.
type Against struct {
	Bits    float64 `json:"bits"`     // this over FP32
	Speedup float64 `json:"speed_up"` // FP32's time over this
	Energy  float64 `json:"energy"`   // this over FP32
	// Whether either of the two figures was extrapolated.
	SpeedupExtrapolated bool `json:"speed_up_extrapolated,omitempty"`
	EnergyExtrapolated  bool `json:"energy_extrapolated,omitempty"`
}

// Side is what a time is spent waiting for.
type Side string

// The sides.
const (
	Nothing    Side = "nothing to do"
	Arithmetic Side = "arithmetic"
	Bandwidth  Side = "memory"
	Drawing    Side = "random bits"
)

// Time is a roofline: a phase of a layer takes the longest of its sides; longer
// work is the sum of its pieces.
type Time struct {
	Seconds    float64 `json:"seconds"`
	Arithmetic float64 `json:"arithmetic_seconds"` // at the peak rate
	Memory     float64 `json:"memory_seconds"`     // at the bandwidth
	Random     float64 `json:"random_seconds"`     // at the rate of drawing
	// Of Seconds, those in pieces that each side binds.
	BoundByArithmetic float64 `json:"bound_by_arithmetic"`
	BoundByMemory     float64 `json:"bound_by_memory"`
	BoundByRandom     float64 `json:"bound_by_random"`
	Binds             Side    `json:"binds"` // the side that binds most of Seconds
	Extrapolated      bool    `json:"extrapolated,omitempty"`
}

// Energy in picojoules.
type Energy struct {
	Total        float64 `json:"total"`
	Multiply     float64 `json:"multiply"` // divisions and square roots included
	Add          float64 `json:"add"`
	Random       float64 `json:"random"`
	Operands     float64 `json:"operands"` // read from the nearest cache
	Cache        float64 `json:"cache"`    // moved bits through the largest one
	Memory       float64 `json:"memory"`   // moved bits to and from main memory
	Extrapolated bool    `json:"extrapolated,omitempty"`
}

// roof makes a time of its three sides.
func roof(arithmetic, memory, random float64) Time {
	t := Time{Arithmetic: arithmetic, Memory: memory, Random: random, Seconds: max(arithmetic, memory, random)}
	switch t.Seconds {
	case arithmetic:
		t.BoundByArithmetic = t.Seconds
	case memory:
		t.BoundByMemory = t.Seconds
	default:
		t.BoundByRandom = t.Seconds
	}
	t.Binds = t.side()
	return t
}

func (t *Time) side() Side {
	most := max(t.BoundByArithmetic, t.BoundByMemory, t.BoundByRandom)
	switch most {
	case 0:
		return Nothing
	case t.BoundByMemory:
		return Bandwidth
	case t.BoundByArithmetic:
		return Arithmetic
	}
	return Drawing
}

func (t *Time) add(o *Time) {
	t.Seconds += o.Seconds
	t.Arithmetic += o.Arithmetic
	t.Memory += o.Memory
	t.Random += o.Random
	t.BoundByArithmetic += o.BoundByArithmetic
	t.BoundByMemory += o.BoundByMemory
	t.BoundByRandom += o.BoundByRandom
	t.Extrapolated = t.Extrapolated || o.Extrapolated
	t.Binds = t.side()
}

func (e *Energy) add(o *Energy) {
	e.Total += o.Total
	e.Multiply += o.Multiply
	e.Add += o.Add
	e.Random += o.Random
	e.Operands += o.Operands
	e.Cache += o.Cache
	e.Memory += o.Memory
	e.Extrapolated = e.Extrapolated || o.Extrapolated
}

func (f *Figures) add(o *Figures) {
	f.Values += o.Values
	f.Bits += o.Bits
	f.Traffic.add(&o.Traffic)
	f.Multiplies += o.Multiplies
	f.Additions += o.Additions
	f.Random += o.Random
	f.Time.add(&o.Time)
	f.Energy.add(&o.Energy)
}

// against compares figures with the same work in FP32.
func (f *Figures) against(ref *Figures) {
	f.Against = Against{
		Bits:    ratio(float64(f.Bits), float64(ref.Bits)),
		Speedup: ratio(ref.Time.Seconds, f.Time.Seconds),
		Energy:  ratio(f.Energy.Total, ref.Energy.Total),

		SpeedupExtrapolated: f.Time.Extrapolated || ref.Time.Extrapolated,
		EnergyExtrapolated:  f.Energy.Extrapolated || ref.Energy.Extrapolated,
	}
}

// ratio is a/b, 1 where either is nothing.
func ratio(a, b float64) float64 {
	if a == 0 || b == 0 {
		return 1
	}
	return a / b
}

// against compares an activity with its like in FP32, total, phases and layers.
func (a *Activity) against(ref *Activity) {
	a.Total.against(&ref.Total)
	for p := range a.Phases {
		a.Phases[p].against(&ref.Phases[p].Figures)
	}
	for i := range a.Layers {
		l, r := &a.Layers[i], &ref.Layers[i]
		l.Total.against(&r.Total)
		for p := range l.Phases {
			l.Phases[p].against(&r.Phases[p].Figures)
		}
	}
}
