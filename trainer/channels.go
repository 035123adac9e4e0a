package trainer

import (
	"fmt"

	"ulpine/quant"
)

// Inputs may be rounded channel by channel: a channel is an index of the first axis of
// an example, and in an example of one axis every value is one, as sensors are. Element
// n of the input tensor draws the same random word whatever its channel's point is.

// inputPoints are the points that inputs are rounded at.
func (a *Arm) inputPoints() []*quant.Point {
	if len(a.Channels) == 0 {
		return []*quant.Point{&a.Input}
	}
	all := make([]*quant.Point, len(a.Channels))
	for i := range a.Channels {
		all[i] = &a.Channels[i]
	}
	return all
}

// checkChannels holds the number of channels to that of the network's input.
func (n *Network) checkChannels(arm *Arm) error {
	if has := len(arm.Channels); has > 0 && (len(n.Input) == 0 || has != n.Input[0]) {
		return fmt.Errorf("input: points for %d channels, an example has the shape %s; give one a channel", has, shapeText(n.Input))
	}
	return nil
}

// stripe is a row of channels that are rounded alike: elements [from, to) of an example.
type stripe struct {
	from, to int
	point    *quant.Point
}

// stripesOf are the stripes of an example of the network's input; nil where all
// channels are one.
func stripesOf(n *Network, arm *Arm) (all []stripe) {
	if len(arm.Channels) == 0 {
		return nil
	}
	each := volume(n.Input) / len(arm.Channels)
	for c := range arm.Channels {
		point := &arm.Channels[c]
		if last := len(all) - 1; last >= 0 && all[last].point.String() == point.String() {
			all[last].to += each
			continue
		}
		all = append(all, stripe{c * each, (c + 1) * each, point})
	}
	return all
}

// takeInputs rounds a batch of inputs.
func (e *engine[T]) takeInputs(p *pass, inputs []float32) {
	bottom, all := e.edges[0], place{layer: -1}
	dst, first := bottom.values(p.samples), p.first*uint64(bottom.per)
	if e.stripes == nil {
		round(all, p, Input, opInput, dst, inputs, &e.arm.Input, first)
		return
	}
	if p.watch != nil {
		look(p.watch, inputs)
	}
	draws, counts := all.draws(p, opInput), all.counts(p, Input)
	for at := 0; at < len(dst); at += bottom.per {
		for _, s := range e.stripes {
			quant.RoundSlice(dst[at+s.from:at+s.to], inputs[at+s.from:at+s.to], s.point, draws, first+uint64(at+s.from), counts)
		}
	}
	if p.watch != nil {
		compareChannels(p.watch, dst, e.arm.Channels, bottom.per)
	}
}

// compareChannels is compare for inputs, each under the bounds of its channel.
func compareChannels[D quant.Element](w *observer, dst []D, channels []quant.Point, per int) {
	s := w.point(-1, Input)
	each := per / len(channels)
	for i, at := range w.at[:w.choose(len(dst))] {
		l := channels[at%per/each].Format.Limits()
		s.count(w.before[i], float64(dst[at]), l.Lowest, l.Max)
	}
}
