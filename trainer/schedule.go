package trainer

import (
	"fmt"
	"math"

	"ulpine/quant/elementary"
)

// at is the learning rate of a step (1 is the first) of total ones, in an epoch (1
// is the first), a binary32 number.
//
//   - Steps of epochs: the start times the factor, one binary32 product for each
//     fall so far.
//   - Cosine: end + (start - end) (1 + cos(pi x))/2 in binary64, operation by
//     operation, then the nearest binary32 number; x = (step - 1 - w)/(total - w),
//     w the steps of warm-up (I. Loshchilov, F. Hutter: SGDR, ICLR 2017, without
//     restarts).
//   - In step n <= w that, at x = 0, times n/w: a binary32 quotient and a binary32
//     product.
func (s Schedule) at(epoch, step, total int) float64 {
	rate := s.rate(epoch)
	if s.Cosine && step > s.WarmUp {
		x := float64(step-1-s.WarmUp) / float64(total-s.WarmUp)
		start, end := single(s.Start), single(s.End)
		share := float64(0.5 * (1 + elementary.Cos(float64(math.Pi*x))))
		rate = single(end + float64((start-end)*share))
	}
	if step < s.WarmUp {
		share := float32(step) / float32(s.WarmUp)
		return float64(float32(float32(rate) * share))
	}
	return rate
}

// rate is the learning rate of an epoch (1 is the first) by its falls alone.
func (s Schedule) rate(epoch int) float64 {
	rate := float32(s.Start)
	for _, at := range s.AtEpochs {
		if at <= epoch {
			rate = float32(rate * float32(s.Multiply))
		}
	}
	return float64(rate)
}

// check refuses learning rates that are not positive numbers.
func (s Schedule) check() error {
	if !(single(s.Start) > 0) || math.IsInf(single(s.Start), 0) {
		return fmt.Errorf("learning rate %g; it must be positive and finite in binary32", s.Start)
	}
	if len(s.AtEpochs) > 0 && (!(single(s.Multiply) > 0) || math.IsInf(single(s.Multiply), 0)) {
		return fmt.Errorf("learning rate multiplied by %g at epochs %v; the factor must be positive and finite in binary32", s.Multiply, s.AtEpochs)
	}
	for _, at := range s.AtEpochs {
		if at < 1 {
			return fmt.Errorf("learning rate multiplied at epoch %d; 1 is the first epoch", at)
		}
	}
	switch end := single(s.End); {
	case s.WarmUp < 0:
		return fmt.Errorf("learning rate warms up over %d steps; it takes 0 (none) or more", s.WarmUp)
	case !s.Cosine && s.End != 0:
		return fmt.Errorf("learning rate ends at %g without a cosine; ask for the cosine or leave the end out", s.End)
	case s.Cosine && len(s.AtEpochs) > 0:
		return fmt.Errorf("learning rate falls at epochs %v and along a cosine; keep one", s.AtEpochs)
	case !(end >= 0) || end > single(s.Start):
		return fmt.Errorf("learning rate ends at %g; it must lie between 0 and the start, %g", s.End, s.Start)
	}
	return nil
}

// checkLength refuses a warm-up that outlasts the training.
func (s Schedule) checkLength(total int) error {
	if s.WarmUp >= total && s.WarmUp > 0 {
		return fmt.Errorf("learning rate warms up over %d steps, the training has %d; use fewer", s.WarmUp, total)
	}
	return nil
}
