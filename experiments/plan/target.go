package plan

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// targetWords open the name of a metric that counts epochs to a target.
const targetWords = "epochs to "

// splitTarget takes "epochs to test accuracy 0.9" apart; of any other name it
// returns the name itself and false.
func splitTarget(name string) (of string, target float64, counts bool) {
	rest, counts := strings.CutPrefix(name, targetWords)
	at := strings.LastIndexByte(rest, ' ')
	if !counts || at < 0 {
		return name, 0, false
	}
	target, err := strconv.ParseFloat(rest[at+1:], 64)
	if err != nil {
		return name, 0, false
	}
	return strings.TrimSpace(rest[:at]), target, true
}

// metric reads the claim's metric, one of the list or epochs to a target of one of
// them. What completes it, a class or a rate, and the target are spelt in one way, so
// that equal claims are equal texts.
func (r *reader) metric(n *node, fallback string, task *Task) string {
	text := strings.TrimSpace(r.text(n, "metric", fallback))
	if !strings.HasPrefix(text, strings.TrimSpace(targetWords)) {
		before := len(r.errs)
		m, _ := findMetric(r.word(n, "metric", fallback, allMetrics()...))
		if len(r.errs) > before {
			return fallback
		}
		return r.qualified(n, m, task)
	}
	fail := func(reason string, args ...any) string {
		r.fail(n.table["metric"].errorf(`write metric = "epochs to test accuracy 0.9" or the like`, reason, args...))
		return fallback
	}
	name, target, counts := splitTarget(text)
	m, known := findMetric(name)
	switch {
	case !counts:
		return fail("%q names no metric and target", text)
	case !known || name != m.name:
		return fail("unknown metric %q", name)
	case !(target > 0) || math.IsInf(target, 0):
		return fail("a target of %g is not positive and finite", target)
	case m.share && target > 1:
		return fail("a target of %g can never be reached: it is a share of one", target)
	}
	return fmt.Sprintf("%s%s %v", targetWords, r.qualified(n, m, task), target)
}
