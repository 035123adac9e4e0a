package results

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// MostFalseAlarms is the largest share of false alarms at which missed faults are
// noted. An alarm that is raised for a fifth of all sound examples is no alarm.
const MostFalseAlarms = 0.2

// The names of metrics that say more than which data they are measured on: "test
// recall of class 3 (bearing)", the class counted from 0, its name for readers only;
// "test missed-fault rate at false-alarm rate 0.01".
const (
	recallWords = "recall"
	missedWords = "missed-fault rate"
	classWords  = " of class "
	rateWords   = " at false-alarm rate "
)

// QualifiedNames are the names that QualifyMetric completes.
func QualifiedNames() []string {
	return []string{
		"test " + recallWords, "validation " + recallWords,
		"test " + missedWords, "validation " + missedWords,
	}
}

// RecallOf is the name of the recall of one class: name is "test recall" or
// "validation recall".
func RecallOf(name string, class int, called string) string {
	return fmt.Sprintf("%s%s%d (%s)", name, classWords, class, called)
}

// MissedAt is the name of the share of faults without alarm at a share of false
// alarms: name is "test missed-fault rate" or "validation missed-fault rate".
func MissedAt(name string, falseAlarms float64) string {
	return fmt.Sprintf("%s%s%v", name, rateWords, falseAlarms)
}

// findQualified reads such a name.
func findQualified(name string) (Metric, bool) {
	data, rest, _ := strings.Cut(name, " ")
	if data != "test" && data != "validation" {
		return Metric{}, false
	}
	of := func(e *Epoch) *ClassScores {
		if data == "test" {
			return e.Test
		}
		return e.Validation
	}
	m := Metric{Name: name, Data: data, Share: true, Unit: point}
	if text, is := strings.CutPrefix(rest, recallWords+classWords); is {
		number, _, _ := strings.Cut(text, " ")
		class, err := strconv.ParseUint(number, 10, 16)
		m.Higher = true
		m.read = func(e *Epoch) float64 { return of(e).Recall(int(class)) }
		return m, err == nil
	}
	text, is := strings.CutPrefix(rest, missedWords+rateWords)
	rate, err := strconv.ParseFloat(text, 64)
	m.falseAlarms, m.alarms = rate, of
	m.read = func(e *Epoch) float64 { return of(e).MissedRate(rate) }
	return m, is && err == nil && rate >= 0 && rate <= MostFalseAlarms
}

// FewSound reports how many sound examples a metric of missed faults is told from,
// where they are so few that the share of false alarms allows none at all, though it
// is not 0; else 0.
func (m Metric) FewSound(r *Run) uint64 {
	if m.of != nil {
		return m.of.FewSound(r)
	}
	if m.alarms == nil || m.falseAlarms == 0 || len(r.Epochs) == 0 {
		return 0
	}
	s := m.alarms(&r.Epochs[len(r.Epochs)-1])
	if s == nil || len(s.Examples) == 0 || AllowedAlarms(m.falseAlarms, s.Examples[0]) > 0 {
		return 0
	}
	return s.Examples[0]
}

// Recall is the share of the examples of a class that were answered rightly; NaN
// where there are none, or nothing was noted.
func (s *ClassScores) Recall(class int) float64 {
	if s == nil || class < 0 || class >= len(s.Examples) || class >= len(s.Right) || s.Examples[class] == 0 {
		return math.NaN()
	}
	return float64(s.Right[class]) / float64(s.Examples[class])
}

// MissedRate is the share of the faults that raise no alarm where at most the given
// share of the sound examples raise one; NaN where it was not noted, or there are no
// sound or no faulty examples.
func (s *ClassScores) MissedRate(falseAlarms float64) float64 {
	if s == nil || len(s.Missed) == 0 {
		return math.NaN()
	}
	var faults uint64
	for _, n := range s.Examples[1:] {
		faults += n
	}
	allowed := AllowedAlarms(falseAlarms, s.Examples[0])
	if faults == 0 || allowed >= uint64(len(s.Missed)) {
		return math.NaN()
	}
	return float64(s.Missed[allowed]) / float64(faults)
}

// AllowedAlarms is the largest number of alarms that is at most the given share of
// n sound examples. The share is a decimal: 0.29 of 100 are 29, though 0.29 x 100
// is less in binary64.
func AllowedAlarms(share float64, n uint64) uint64 {
	allowed := uint64(math.Floor(max(0, float64(share*float64(n)))))
	if allowed < n && float64(allowed+1)/float64(n) <= share {
		allowed++
	}
	return min(allowed, n)
}
