package report

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
	"unicode"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// missing stands for a number that is not there.
const missing = "-"

// minus writes a real minus sign, for print.
func minus(s string) string { return strings.ReplaceAll(s, "-", "−") }

// fixed spells v with a number of decimals; missing when it is not finite.
func fixed(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return missing
	}
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return minus(s)
}

// signed is fixed with a sign. What rounds to zero has none.
func signed(v float64, decimals int) string {
	s := fixed(v, decimals)
	if v > 0 && s != missing && strings.Trim(s, "0.") != "" {
		return "+" + s
	}
	return s
}

// significant spells v with n significant digits.
func significant(v float64, n int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return missing
	}
	return minus(strconv.FormatFloat(v, 'g', n, 64))
}

// scoreWords spells values and differences of a study's metric: shares of one
// as per cent, their differences in percentage points (pp).
type scoreWords struct {
	metric  results.Metric
	known   bool
	percent bool
	digits  int // decimals of a difference
}

// newScoreWords chooses decimals so that a fiftieth of the margin still shows.
func newScoreWords(name string, margin float64) scoreWords {
	m, ok := results.FindMetric(name)
	if !ok {
		m.Name = name
		m.Higher = !strings.Contains(name, "loss") && !strings.Contains(name, "error")
	}
	s := scoreWords{metric: m, known: ok, percent: m.Share}
	s.digits = 4
	if d := s.scale(margin); d > 0 && !math.IsInf(d, 0) {
		s.digits = min(8, max(0, int(math.Ceil(-math.Log10(d/50)))))
	}
	return s
}

// scale turns a value into the unit it is printed in.
func (s scoreWords) scale(v float64) float64 {
	if s.percent {
		return 100 * v
	}
	return v
}

// diff spells a difference, without its unit.
func (s scoreWords) diff(v float64) string { return signed(s.scale(v), s.digits) }

// short is the unit of a difference as figures and columns carry it: "pp",
// "nats", "epochs"; empty for a metric that is not known.
func (s scoreWords) short() string {
	if s.percent {
		return "pp"
	}
	return s.unitWords()
}

// unit is short with the blank before it, or nothing.
func (s scoreWords) unit() string {
	if u := s.short(); u != "" {
		return " " + u
	}
	return ""
}

// unitWords is the unit of a difference written out, empty when there is none.
func (s scoreWords) unitWords() string {
	return s.metric.Units()
}

// value spells a value of the metric: "93.41 %".
func (s scoreWords) value(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return missing
	}
	if s.percent {
		return fixed(100*v, max(1, min(s.digits, 2))) + " %"
	}
	return significant(v, 4)
}

// interval spells an interval of differences.
func (s scoreWords) interval(low, high float64) string {
	if math.IsNaN(low) || math.IsNaN(high) {
		return missing
	}
	return "[" + s.bound(low) + ", " + s.bound(high) + "]"
}

// bound spells one end of an interval; an end that is not bounded is infinite.
func (s scoreWords) bound(v float64) string {
	switch {
	case math.IsInf(v, 1):
		return "+∞"
	case math.IsInf(v, -1):
		return "−∞"
	}
	return s.diff(v)
}

// percentage spells a share of one as a whole or one-decimal percentage: "95 %".
func percentage(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return missing
	}
	return strconv.FormatFloat(100*v, 'g', 4, 64) + " %"
}

// day spells a moment; the zero time is missing.
func day(t time.Time) string {
	if t.IsZero() {
		return missing
	}
	return t.UTC().Format("2006-01-02 15:04 UTC")
}

// verdictWords are the words of a verdict, and no others.
func verdictWords(v results.Verdict) string {
	switch v.Kind {
	case results.Within:
		return "within margin"
	case results.Worse:
		return "worse than margin"
	case results.Diverged:
		return fmt.Sprintf("diverged %d of %d", v.Diverged, v.Of)
	}
	if v.Pairs > 0 {
		return fmt.Sprintf("undecided (needs about %d pairs)", v.Pairs)
	}
	return "undecided"
}

// verdictMark is the mark of a verdict as one character of text.
func verdictMark(k results.VerdictKind) string {
	switch k {
	case results.Within:
		return "●"
	case results.Worse:
		return "○"
	case results.Diverged:
		return "◌"
	}
	return "◐"
}

// plural spells a count with its noun: "1 run", "3 runs".
func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}

// bits spells bits per value.
func bits(v float64) string {
	if v <= 0 {
		return missing
	}
	return fixed(v, 1)
}

// plain is a line that is safe to print anywhere: no control characters.
func plain(s string) string { return strings.TrimSpace(draw.Clean(s)) }

// plainLines is plain for text of several lines.
func plainLines(s string) string {
	lines := strings.Split(strings.ReplaceAll(s, "\r\n", "\n"), "\n")
	for i, l := range lines {
		lines[i] = strings.TrimRightFunc(draw.Clean(strings.ReplaceAll(l, "\t", "    ")), unicode.IsSpace)
	}
	return strings.Trim(strings.Join(lines, "\n"), "\n")
}
