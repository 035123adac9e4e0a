package compare

import (
	"fmt"
	"strings"
	"testing"

	"ulpine/results"
)

// sweep is a study of a grid of fraction x length; the arm at place i is within where
// the i-th letter is a w.
func sweep(verdicts string, fractions, lengths []string) *results.Study {
	s := &results.Study{Arms: []results.Arm{{Name: "baseline", Slug: "baseline", Baseline: true, Bits: 32}}}
	i := 0
	for _, f := range fractions {
		for _, l := range lengths {
			slug := fmt.Sprintf("m%s-%s", f, l)
			a := results.Arm{Name: slug, Slug: slug, Grid: "adders", Bits: 32, Axes: []results.Coordinate{{Axis: "fraction", Value: f}}}
			if l != "" {
				a.Axes = append(a.Axes, results.Coordinate{Axis: "length", Value: l})
			}
			v := results.Verdict{Kind: results.Undecided}
			if verdicts[i] == 'w' {
				v.Kind = results.Within
			}
			s.Arms, s.Comparisons = append(s.Arms, a), append(s.Comparisons, compared(slug, v, 10))
			i++
		}
	}
	return s
}

// TestThresholds: the least value from which on all are within, place by place; a
// lucky one below does not count.
func TestThresholds(t *testing.T) {
	three := []string{"2", "4", "7"}
	for _, c := range []struct {
		study *results.Study
		want  string
	}{
		{sweep("..ww.www.", three, []string{"16", "128", "1024"}), "Along fraction, all that were tried stay within the margin from 4 on at length 16; from 7 on at length 128; from none on at length 1024."},
		{sweep("w.www", []string{"1", "2", "3", "4", "5"}, []string{""}), "Along fraction, all that were tried stay within the margin from 3 on."},
		{sweep("wwwwww", three, []string{"16", "128"}), "Along fraction, all that were tried stay within the margin from 2 on at length 16 and length 128."},
		{sweep("ww.", three, []string{""}), ""},
		{sweep("ww", three[:2], []string{""}), ""},
		{sweep("www", []string{"7", "2", "4"}, []string{""}), ""},
		{sweep("www", []string{"E4M3", "E5M2", "E3M4"}, []string{""}), ""},
	} {
		if got := strings.Join(thresholds(c.study), " "); got != c.want {
			t.Errorf("got  %s\nwant %s", got, c.want)
		}
		if got := Answer(c.study); !strings.Contains(got, c.want) || strings.Contains(got, "keep") {
			t.Errorf("answer %s", got)
		}
	}
}
