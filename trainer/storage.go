package trainer

import (
	"fmt"

	"ulpine/quant"
)

// setting is one rounding point of one layer as an arm sets it.
type setting struct {
	layer  int
	id     PointID
	point  *quant.Point
	stored bool // a tensor is stored with it; otherwise it lives inside sums
}

// settings lists the points an arm sets, those that reuse another's tensor or
// are exact left out, for the layers of a network in turn.
func (n *Network) settings(arm *Arm) []setting {
	var all []setting
	for _, point := range arm.inputPoints() {
		all = append(all, setting{-1, Input, point, true})
	}
	all = append(all, setting{-1, LossGradient, &arm.LossGradient, true})
	for i := range n.Layers {
		for _, id := range n.Layers[i].Points {
			for _, point := range arm.Layers[i].At(id) {
				all = append(all, setting{i, id, point, !id.InsideSums()})
			}
		}
	}
	return all
}

// allSettings are the settings of an arm and of its stages.
func (n *Network) allSettings(arm *Arm) (all []setting) {
	for _, a := range arm.arms() {
		all = append(all, n.settings(a)...)
	}
	return all
}

// InsideSums reports whether the point rounds products or partial sums, and so
// is no tensor's format.
func (p PointID) InsideSums() bool {
	switch p {
	case ForwardProduct, ForwardSum, ForwardOuter,
		InputGradientProduct, InputGradientSum, InputGradientOuter,
		WeightGradientProduct, WeightGradientSum, WeightGradientOuter,
		ForwardStatistic, InputGradientStatistic:
		return true
	}
	return false
}

// At is what the arithmetic holds at a point of a layer: nothing where the point
// is unset, one point, one a state tensor at update.state, sum, product and outer of a
// statistic. input and
// loss.gradient are the arm's own.
func (a *Arithmetic) At(id PointID) []*quant.Point {
	switch id {
	case ForwardWeight:
		return []*quant.Point{&a.Weight}
	case ForwardActivation:
		return []*quant.Point{&a.Activation}
	case ForwardProduct, ForwardSum, ForwardOuter:
		return within(&a.Forward, id-ForwardProduct)
	case InputGradientWeight, InputGradientGradient, InputGradientResult:
		return beside(&a.InputGradient, id-InputGradientWeight)
	case InputGradientProduct, InputGradientSum, InputGradientOuter:
		return within(&a.InputGradient.Sums, id-InputGradientProduct)
	case WeightGradientActivation, WeightGradientGradient, WeightGradientResult:
		return beside(&a.WeightGradient, id-WeightGradientActivation)
	case WeightGradientProduct, WeightGradientSum, WeightGradientOuter:
		return within(&a.WeightGradient.Sums, id-WeightGradientProduct)
	case UpdateState:
		points := make([]*quant.Point, len(a.States))
		for i := range a.States {
			points[i] = &a.States[i]
		}
		return points
	case WeightGradientResidue:
		return given(a.WeightGradient.Residue)
	case ForwardOperand:
		return given(a.Operand)
	case ForwardStatistic:
		return throughout(a.Statistic)
	case InputGradientStatistic:
		return throughout(a.InputGradient.Statistic)
	case ForwardMoment:
		return given(a.Moment)
	case UpdateStep:
		return []*quant.Point{&a.Step}
	case UpdateMaster:
		return []*quant.Point{&a.Master}
	}
	return nil
}

// within is the product, the sum or the outer point of an accumulation.
func within(acc *quant.Accumulate, which PointID) []*quant.Point {
	return given([...]*quant.Point{acc.Product, &acc.Sum, acc.Outer}[which])
}

// throughout are all points of a statistic's sums: sum, product, outer.
func throughout(acc *quant.Accumulate) []*quant.Point {
	if acc == nil {
		return nil
	}
	points := []*quant.Point{&acc.Sum}
	return append(append(points, given(acc.Product)...), given(acc.Outer)...)
}

// beside is a backward phase's first operand, its gradient operand or, last, its
// result.
func beside(b *Backward, which PointID) []*quant.Point {
	switch which {
	case 0:
		return given(b.First)
	case 1:
		return given(b.Gradient)
	}
	return given(&b.Result)
}

func given(p *quant.Point) []*quant.Point {
	if p == nil {
		return nil
	}
	return []*quant.Point{p}
}

// containers decides how tensors are stored. double: some value of a tensor or of
// a product, partial sum or outer sum may not be a binary32 number, so memory is
// float64. wide: some stored tensor has such a format, so parameters are recorded
// in eight bytes. Neither changes a bit of any value.
func (n *Network) containers(arm *Arm) (double, wide bool) {
	for _, s := range n.allSettings(arm) {
		if !quant.Fits32(s.point.Format) {
			double = true
			wide = wide || s.stored
		}
	}
	return double, wide
}

// checkArm checks an arm and its stages.
func (n *Network) checkArm(arm *Arm, states int) error {
	for i, a := range arm.arms() {
		if err := n.checkArithmetic(a, states); err != nil && i > 0 {
			return fmt.Errorf("stage %d: %w", i, err)
		} else if err != nil {
			return err
		}
	}
	return nil
}

// checkArithmetic finds points without a format, or that quant refuses.
func (n *Network) checkArithmetic(arm *Arm, states int) error {
	if len(arm.Layers) != len(n.Layers) {
		return fmt.Errorf("the arm sets %d layers, the network has %d", len(arm.Layers), len(n.Layers))
	}
	for i := range n.Layers {
		if has := len(arm.Layers[i].States); len(n.Layers[i].Params) > 0 && has != states {
			return fmt.Errorf("layer %d (%s): the arm sets %d state tensors, the optimizer keeps %d", i+1, n.Layers[i].Name, has, states)
		}
	}
	if err := n.checkChannels(arm); err != nil {
		return err
	}
	for _, s := range n.settings(arm) {
		if err := CheckPoint(s.id, s.point); err != nil {
			return fmt.Errorf("%s, %s: %w", n.where(s.layer), s.id, err)
		}
	}
	return arm.LossScale.check()
}

// where names a layer in an error.
func (n *Network) where(layer int) string {
	if layer < 0 {
		return "network"
	}
	return fmt.Sprintf("layer %d (%s)", layer+1, n.Layers[layer].Name)
}
