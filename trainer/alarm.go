package trainer

import (
	"math"
	"slices"

	"ulpine/quant"
	"ulpine/quant/elementary"
)

// Alarms. Class 0 is the sound state, every other class a fault. The score of an
// example is the log odds of a fault as the softmax has them, in binary64 from the
// rounded outputs, classes ascending, m the largest output:
//
//	score = log(exp(y[1] - m) + exp(y[2] - m) + ...) - (y[0] - m)
//
// It orders examples as the probability of a fault does and does not saturate at
// one. It is NaN where an output is NaN.

// alarmScore is the score of one example's outputs.
func alarmScore[T quant.Element](y []T) float64 {
	largest := float64(y[0])
	for _, v := range y {
		largest = max(largest, float64(v))
	}
	var faults float64
	for _, v := range y[1:] {
		faults += elementary.Exp(float64(v) - largest)
	}
	return elementary.Log(faults) - (float64(y[0]) - largest)
}

// MissedFaults raises an alarm where a score lies above a threshold, the lowest at
// which at most the given share of sound examples raises one, and counts the faulty
// examples without alarm, and all faulty examples. Equal scores share their fate.
// An example without an answer is judged against the network: a sound one raises an
// alarm, a fault is missed. ok is false where there are no scores, no sound or no
// faulty examples.
func (s *Scores) MissedFaults(falseAlarms float64) (missed, faults uint64, ok bool) {
	var sound []float64
	for i, score := range s.Alarm {
		if s.Truth[i] == 0 {
			if score != score {
				score = math.Inf(1)
			}
			sound = append(sound, score)
		}
	}
	faults = uint64(len(s.Alarm) - len(sound))
	if len(sound) == 0 || faults == 0 {
		return 0, faults, false
	}
	slices.Sort(sound)
	threshold := math.Inf(-1)
	if allowed := int(math.Floor(float64(falseAlarms * float64(len(sound))))); allowed < len(sound) {
		threshold = sound[len(sound)-1-max(0, allowed)]
	}
	for i, score := range s.Alarm {
		if s.Truth[i] != 0 && !(score > threshold) {
			missed++
		}
	}
	return missed, faults, true
}
