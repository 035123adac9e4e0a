package trainer

import (
	"math"
	"slices"
	"sort"

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

// ClassScores are the answers of an evaluation by class.
type ClassScores struct {
	Examples, Right []uint64 // of each class
	// Missed[a] counts the faults without alarm where at most a sound examples raise
	// one; see Scores.MissedFaults.
	Missed []uint64
}

// mostFalseAlarms is the largest share of false alarms at which missed faults are
// counted.
const mostFalseAlarms = 0.2

// byClass sums up the answers of an evaluation; nil in a regression.
func (s *Scores) byClass() *ClassScores {
	if s.Classes == 0 {
		return nil
	}
	c := &ClassScores{Examples: slices.Clone(s.Unanswered), Right: make([]uint64, s.Classes)}
	for class := range s.Classes {
		row := s.Confusion[int(class*s.Classes):][:s.Classes]
		for _, n := range row {
			c.Examples[class] += n
		}
		c.Right[class] = row[class]
	}
	sound, faults := s.alarms()
	if len(sound) == 0 || len(faults) == 0 {
		return c
	}
	for a := range int(allowedAlarms(mostFalseAlarms, len(sound))) + 1 {
		c.Missed = append(c.Missed, missedAt(sound, faults, a))
	}
	return c
}

// alarms are the scores of sound and of faulty examples, ascending. An example
// without an answer is judged against the network: a sound one raises an alarm at
// every threshold, a fault at none.
func (s *Scores) alarms() (sound, faults []float64) {
	for i, score := range s.Alarm {
		switch {
		case s.Truth[i] == 0 && score != score:
			sound = append(sound, math.Inf(1))
		case s.Truth[i] == 0:
			sound = append(sound, score)
		case score != score:
			faults = append(faults, math.Inf(-1))
		default:
			faults = append(faults, score)
		}
	}
	slices.Sort(sound)
	slices.Sort(faults)
	return sound, faults
}

// missedAt counts the faults, ascending, that do not lie above the threshold at
// which at most the allowed number of sound examples does.
func missedAt(sound, faults []float64, allowed int) uint64 {
	threshold := math.Inf(-1)
	if allowed < len(sound) {
		threshold = sound[len(sound)-1-allowed]
	}
	above := sort.Search(len(faults), func(i int) bool { return faults[i] > threshold })
	return uint64(above)
}

// allowedAlarms is the largest number of alarms that is at most the given share of
// n sound examples. The share is a decimal: 0.29 of 100 are 29, though 0.29 x 100 is
// less in binary64.
func allowedAlarms(share float64, n int) int {
	allowed := int(math.Floor(max(0, float64(share*float64(n)))))
	if allowed < n && float64(allowed+1)/float64(n) <= share {
		allowed++
	}
	return min(allowed, n)
}

// MissedFaults raises an alarm where a score lies above a threshold, the lowest at
// which at most the given share of sound examples raises one, and counts the faulty
// examples without alarm, and all faulty examples. The threshold is that of the very
// examples that are scored, not of others, so that the rate of false alarms is the
// one asked for. Equal scores share their fate. An example without an answer is
// judged against the network: a sound one raises an alarm, a fault is missed. ok is
// false where there are no scores, no sound or no faulty examples.
func (s *Scores) MissedFaults(falseAlarms float64) (missed, faults uint64, ok bool) {
	sound, faulty := s.alarms()
	if len(sound) == 0 || len(faulty) == 0 {
		return 0, uint64(len(faulty)), false
	}
	return missedAt(sound, faulty, allowedAlarms(falseAlarms, len(sound))), uint64(len(faulty)), true
}
