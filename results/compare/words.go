package compare

import (
	"math"
	"strconv"
	"strings"

	"ulpine/results"
)

// measure spells differences of a metric in the unit a reader thinks in:
// accuracies in percentage points, cross-entropies in nats.
type measure struct {
	metric   results.Metric
	decimals int // of differences and the ends of their intervals
}

// newMeasure chooses decimals so that a fiftieth of the margin still shows, as
// the tables do.
func newMeasure(c *results.Comparison) measure {
	m, known := results.FindMetric(c.Metric)
	if m = m.Of(c.Regression); !known {
		m = results.Metric{Name: c.Metric, Higher: true}
	}
	w := measure{metric: m, decimals: 4}
	if margin := w.scale(c.Margin); margin > 0 && !math.IsInf(margin, 0) {
		w.decimals = min(8, max(0, int(math.Ceil(-math.Log10(margin/50)))))
	}
	return w
}

// scale turns a difference into its printed unit.
func (w measure) scale(x float64) float64 {
	if w.metric.Share {
		return 100 * x
	}
	return x
}

// figure is a difference without its unit, with a real minus sign.
func (w measure) figure(x float64) string {
	switch {
	case math.IsInf(x, 1):
		return "+∞"
	case math.IsInf(x, -1):
		return "−∞"
	}
	text := minus(strconv.FormatFloat(w.scale(x), 'f', w.decimals, 64))
	if strings.Trim(text, "−0.") == "" { // no −0.00 in prose
		return strings.TrimPrefix(text, "−")
	}
	return text
}

// span is an interval without its unit: "−0.62 to 1.10".
func (w measure) span(low, high float64) string { return w.figure(low) + " to " + w.figure(high) }

// with puts the unit behind a figure, in the plural unless it is one.
func (w measure) with(figure string) string {
	switch {
	case w.metric.Unit == "":
		return figure
	case figure == "1":
		return figure + " " + w.metric.Unit
	}
	return figure + " " + w.metric.Units()
}

// margin is a margin with its unit, in as few digits as it needs.
func (w measure) margin(x float64) string { return w.with(amount(w.scale(x))) }

// minus writes real minus signs.
func minus(s string) string { return strings.ReplaceAll(s, "-", "−") }

// list joins words as prose does.
func list(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}

// be is the verb between n subjects and what is said of them.
func be(n int) string {
	if n == 1 {
		return " is "
	}
	return " are "
}

// number is a count with its noun, plural by an s.
func number(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}

// amount prints a figure with at most three significant digits, without an
// exponent where four decimals suffice.
func amount(x float64) string {
	rounded, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 3, 64), 64)
	if err != nil || rounded != 0 && math.Abs(rounded) < 1e-5 {
		return minus(strconv.FormatFloat(x, 'g', 3, 64))
	}
	return minus(strconv.FormatFloat(rounded, 'f', -1, 64))
}
