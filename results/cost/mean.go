package cost

import (
	"math"
	"slices"
)

// Mean is the bill of an arm that changes its arithmetic on the way, the arms of the
// result being its stages and weights, one a stage, the shares of its steps. A step's
// figures are means by weight, counts to the nearest whole one; the width of a value
// is a mean too. The memory of training is the stage's that takes most, because it
// must be had, an inference and its memory are the last stage's.
func (r *Result) Mean(weights []float64) Bill {
	last, most := len(r.Arms)-1, 0
	b := r.Arms[last]
	var sum, width float64
	for i, w := range weights {
		sum += w
		width += w * r.Arms[i].Memory.Width
		if r.Arms[i].Memory.Training.Bits > r.Arms[most].Memory.Training.Bits {
			most = i
		}
	}
	b.Memory.Training, b.Memory.Tensors = r.Arms[most].Memory.Training, r.Arms[most].Memory.Tensors
	b.Memory.Width = width / sum
	shares := make([]float64, len(weights))
	for i, w := range weights {
		shares[i] = w / sum
	}
	b.Once.mean(r.Arms, shares, func(b *Bill) *Account { return &b.Once })
	b.Tiled.mean(r.Arms, shares, func(b *Bill) *Account { return &b.Tiled })
	b.against(&r.Reference)
	return b
}

// mean makes the account's step the mean of the stages' steps, and its labels theirs.
func (a *Account) mean(stages []Bill, shares []float64, of func(b *Bill) *Account) {
	for i := range stages {
		from := of(&stages[i])
		for _, l := range [][2]*Label{{&a.TimeLabel, &from.TimeLabel}, {&a.EnergyLabel, &from.EnergyLabel}} {
			l[0].Extrapolated = l[0].Extrapolated || l[1].Extrapolated
			for _, rule := range l[1].Rules {
				if !slices.Contains(l[0].Rules, rule) {
					l[0].Rules = append(slices.Clone(l[0].Rules), rule)
				}
			}
		}
	}
	var phases []Phase
	mean := Activity{Total: idle()}
	for _, p := range a.Step.Phases {
		phases = append(phases, p.Phase)
		mean.Phases = append(mean.Phases, PhaseFigures{Phase: p.Phase, Figures: idle()})
	}
	for i, l := range a.Step.Layers {
		mean.layer(LayerFigures{Layer: l.Layer, Name: l.Name, Kind: l.Kind}, phases, func(ph Phase) Figures {
			f := idle()
			for s := range stages {
				f.addShare(&of(&stages[s]).Step.Layers[i].Phases[slices.Index(phases, ph)].Figures, shares[s])
			}
			f.whole()
			return f
		})
	}
	a.Step = mean
}

// shareUnit is the fraction of a count that shares are added in.
const shareUnit = 1 << 12

// addShare adds a share of other figures; counts are in units of 1/shareUnit until
// they are made whole.
func (f *Figures) addShare(o *Figures, share float64) {
	part := func(n uint64) uint64 { return uint64(math.Floor(float64(n)*share*shareUnit + 0.5)) }
	t := &o.Traffic
	f.add(&Figures{
		Values: part(o.Values), Multiplies: part(o.Multiplies), Additions: part(o.Additions), Random: part(o.Random),
		Traffic: ByClass{part(t.Weights), part(t.Activations), part(t.Gradients), part(t.State), part(t.Master)},
		Time: Time{
			Seconds: share * o.Time.Seconds, Arithmetic: share * o.Time.Arithmetic, Memory: share * o.Time.Memory, Random: share * o.Time.Random,
			BoundByArithmetic: share * o.Time.BoundByArithmetic, BoundByMemory: share * o.Time.BoundByMemory, BoundByRandom: share * o.Time.BoundByRandom,
			Extrapolated: o.Time.Extrapolated,
		},
		Energy: Energy{
			Total: share * o.Energy.Total, Multiply: share * o.Energy.Multiply, Add: share * o.Energy.Add, Random: share * o.Energy.Random,
			Operands: share * o.Energy.Operands, Cache: share * o.Energy.Cache, Memory: share * o.Energy.Memory, Extrapolated: o.Energy.Extrapolated,
		},
	})
}

// whole rounds counts to the nearest whole one. Bits are what their classes sum to.
func (f *Figures) whole() {
	for _, n := range []*uint64{
		&f.Values, &f.Multiplies, &f.Additions, &f.Random,
		&f.Traffic.Weights, &f.Traffic.Activations, &f.Traffic.Gradients, &f.Traffic.State, &f.Traffic.Master,
	} {
		*n = (*n + shareUnit/2) / shareUnit
	}
	f.Bits = f.Traffic.Total()
}
