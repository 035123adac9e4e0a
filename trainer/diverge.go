package trainer

// When a run is given up, and when it is said to have learnt nothing.
const (
	highFactor = 3 // an epoch's loss over this many times the first step's ...
	highEpochs = 2 // ... for this many epochs running is divergence
	stallShare = 0.95
)

// The reasons of divergence.
const (
	divergedLoss   = "the loss is not finite"
	divergedMaster = "a parameter is not finite"
	divergedHigh   = "the epoch's loss is over 3 times the first step's for 2 epochs running"
	divergedSkips  = "10 steps skipped in a row"
)

// judgeStep finds divergence in the step just taken.
func (r *run[T]) judgeStep(what fate) {
	switch {
	case what == lossNotFinite:
		r.diverge(divergedLoss)
	case what == masterNotFinite:
		r.diverge(divergedMaster)
	case r.scaler.row >= skipsToDiverge:
		r.diverge(divergedSkips)
	}
}

// judgeEpoch finds divergence in the loss of the epoch just ended.
func (r *run[T]) judgeEpoch(loss float64) {
	if loss > float64(highFactor*r.out.Steps[0]) {
		r.high++
	} else {
		r.high = 0
	}
	if r.high >= highEpochs && r.out.Diverged == "" {
		r.diverge(divergedHigh)
	}
}

func (r *run[T]) diverge(reason string) {
	r.out.Diverged, r.out.DivergedStep = reason, len(r.out.Steps)
}
