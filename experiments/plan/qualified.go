package plan

import (
	"fmt"
	"strings"
)

// The keys of a claim that complete a metric, and the words with which its name
// then goes on: "test recall of class 3 (bearing)".
const (
	classKey = "class"
	rateKey  = "false_alarm_rate"

	classWords = " of class "
	rateWords  = " at false-alarm rate "
)

// mostFalseAlarms is the largest share of false alarms at which runs note missed
// faults.
const mostFalseAlarms = 0.2

// allMetrics are the names that metric may have in a plan, without a target.
func allMetrics() []string {
	names := make([]string, len(metrics))
	for i, m := range metrics {
		names[i] = m.name
	}
	return names
}

// findMetric finds a metric by its name, completed or not.
func findMetric(name string) (metric, bool) {
	for _, m := range metrics {
		goesOn := m.key != "" && (strings.HasPrefix(name, m.name+classWords) || strings.HasPrefix(name, m.name+rateWords))
		if name == m.name || goesOn {
			return m, true
		}
	}
	return metric{}, false
}

// qualified is the name of a metric with what completes it. Keys that complete
// another metric are an error, as they would say something that is not so.
func (r *reader) qualified(n *node, m metric, task *Task) string {
	for key, of := range map[string]string{classKey: "recall", rateKey: "missed-fault rate"} {
		if at := n.table[key]; at != nil && m.key != key {
			r.fail(at.errorf("leave it out", "it belongs to a %s, but the metric is %s", of, m.name))
		}
	}
	switch m.key {
	case classKey:
		return r.recallOf(n, m, task)
	case rateKey:
		return r.missedAt(n, m)
	}
	return m.name
}

// recallOf reads the class whose recall is meant.
func (r *reader) recallOf(n *node, m metric, task *Task) string {
	if len(task.ClassNames) == 0 {
		return m.name // no classes, which is told elsewhere
	}
	if n.table[classKey] == nil {
		r.fail(n.errorf(fmt.Sprintf("write class = %q", task.ClassNames[0]), "class is missing: %s is that of one class", m.name))
		return m.name
	}
	class := r.word(n, classKey, "", task.ClassNames...)
	for i, name := range task.ClassNames {
		if name == class {
			return fmt.Sprintf("%s%s%d (%s)", m.name, classWords, i, name)
		}
	}
	return m.name
}

// missedAt reads the share of false alarms at which missed faults are counted.
func (r *reader) missedAt(n *node, m metric) string {
	at := n.table[rateKey]
	if at == nil {
		r.fail(n.errorf("write false_alarm_rate = 0.01", "false_alarm_rate is missing: %s is that at a fixed rate of false alarms", m.name))
		return m.name
	}
	before := len(r.errs)
	rate := r.number(n, rateKey, 0.01)
	if len(r.errs) == before && !(rate >= 0 && rate <= mostFalseAlarms) {
		r.fail(at.errorf(fmt.Sprintf("write a share from 0 to %g, as 0.01", mostFalseAlarms), "a rate of %g is out of range", rate))
	}
	return fmt.Sprintf("%s%s%v", m.name, rateWords, rate)
}
