package trainer

import (
	"fmt"
	"math"

	"ulpine/quant"
	"ulpine/quant/random"
)

// Augment alters training examples anew in every epoch; evaluations see the data as
// they are. What is done to an example is a function of the replicate's seed, the
// epoch and the example's number in the training set, on the stream of augmentation:
// it depends on no arm, batch, order of examples or worker. With x an example as the
// data set gives it:
//
//   - Shift moves a signal [channels, length] by a whole number of places, uniform in
//     -Shift to Shift, and an image [channels, height, width] by one such number of
//     rows and one of columns, all channels alike: y[j] = x[j-s], where what would
//     come from beyond an edge is the value at the edge;
//   - then Noise adds independent normal numbers of that standard deviation, in units
//     of the inputs as the network gets them: the binary32 number nearest to the
//     binary64 sum y + R64(noise z).
//
// With d the draws of Step = epoch, Site = number and Phase = 0, the numbers of rows
// and columns are d.Uniform(0) and d.Uniform(1), of a signal the second, times
// 2 Shift + 1, rounded down, less Shift; z of value i, row-major, is Normal(i) under
// Phase = 1. The noise is the binary32 number nearest to its decimal.
type Augment struct {
	Shift int     // places; 0: none
	Noise float64 // standard deviation; 0: none
}

// Any reports whether anything is altered.
func (a Augment) Any() bool { return a.Shift != 0 || a.Noise != 0 }

// Check holds an augmentation to the shape of an example.
func (a Augment) Check(shape []int) error {
	noise := single(a.Noise)
	switch {
	case a.Shift < 0:
		return fmt.Errorf("augment: a shift of %d places; it must be 0 or more", a.Shift)
	case !(noise >= 0) || math.IsInf(noise, 0) || noise == 0 && a.Noise != 0:
		return fmt.Errorf("augment: noise of %g; it must be 0, or positive and finite in binary32", a.Noise)
	case a.Shift == 0:
		return nil
	case len(shape) != 2 && len(shape) != 3:
		return fmt.Errorf("augment: examples of shape %s cannot be shifted; only signals [channels, length] and images [channels, height, width] can", shapeText(shape))
	}
	for _, n := range shape[1:] {
		if a.Shift >= n {
			return fmt.Errorf("augment: a shift of %d places would leave nothing of an example of shape %s; use less than %d", a.Shift, shapeText(shape), n)
		}
	}
	return nil
}

// The phases of an augmentation's draws.
const (
	phaseShift uint32 = iota
	phaseNoise
)

// augmenter alters the examples of one training.
type augmenter struct {
	Augment
	noise         float64
	key           uint64
	channels      int
	height, width int // 1 row where the example is a signal
	image         bool
}

// newAugmenter is nil where nothing is altered.
func newAugmenter(a Augment, shape []int, seed uint64) *augmenter {
	if !a.Any() {
		return nil
	}
	g := &augmenter{
		Augment: a, noise: single(a.Noise), key: random.Derive(seed, random.Augmentation),
		channels: 1, height: 1, width: volume(shape),
	}
	switch len(shape) {
	case 2:
		g.channels, g.width = shape[0], shape[1]
	case 3:
		g.channels, g.height, g.width, g.image = shape[0], shape[1], shape[2], true
	}
	return g
}

// fill writes example number, as it is in an epoch, to dst; x is as it is given and
// stays so.
func (g *augmenter) fill(dst, x []float32, epoch int, number int32) {
	d := quant.Draws{Seed: g.key, Step: uint32(epoch), Site: uint32(number), Phase: phaseShift}
	if g.Shift == 0 {
		copy(dst, x)
	} else {
		rows := 0
		if g.image {
			rows = g.places(d.Uniform(0))
		}
		g.shift(dst, x, rows, g.places(d.Uniform(1)))
	}
	if g.noise == 0 {
		return
	}
	d.Phase = phaseNoise
	for i, v := range dst {
		dst[i] = float32(float64(v) + float64(g.noise*d.Normal(uint64(i))))
	}
}

// places turns a uniform number below 1 into one of -Shift to Shift.
func (g *augmenter) places(u float64) int {
	return int(math.Floor(float64(u*float64(2*g.Shift+1)))) - g.Shift
}

// shift moves all channels down and to the right, edges repeated.
func (g *augmenter) shift(dst, x []float32, rows, columns int) {
	for c := range g.channels {
		for i := range g.height {
			from := x[(c*g.height+inside(i-rows, g.height))*g.width:][:g.width]
			to := dst[(c*g.height+i)*g.width:][:g.width]
			for j := range to {
				to[j] = from[inside(j-columns, g.width)]
			}
		}
	}
}

// inside is the place within n that is nearest to i.
func inside(i, n int) int { return min(max(i, 0), n-1) }
