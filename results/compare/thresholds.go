package compare

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"ulpine/results"
)

// fewValues is the least length of an axis along which a threshold says more than
// the arms' names do; mostPlaces is how many places on the other axes are told.
const (
	fewValues  = 3
	mostPlaces = 6
)

// thresholds are the sentences about grids whose first axis of numbers has a value
// from which on all arms stay within the margin: "how few bits are enough" in one
// line. Grids without such an axis have none.
func thresholds(s *results.Study) (said []string) {
	var grids []string
	arms := map[string][]*results.Arm{}
	for i := range s.Arms {
		a := &s.Arms[i]
		if a.Grid == "" {
			continue
		}
		if arms[a.Grid] == nil {
			grids = append(grids, a.Grid)
		}
		arms[a.Grid] = append(arms[a.Grid], a)
	}
	within := map[string]bool{}
	for i := range s.Comparisons {
		within[s.Comparisons[i].Arm] = s.Comparisons[i].Verdict.Kind == results.Within
	}
	for _, g := range grids {
		if axis := numericAxis(arms[g]); axis >= 0 {
			if text := threshold(arms[g], axis, within); text != "" {
				said = append(said, text)
			}
		}
	}
	return said
}

// numericAxis is the first axis of a grid with numbers that ascend, enough of them;
// -1: there is none.
func numericAxis(arms []*results.Arm) int {
axes:
	for i := range arms[0].Axes {
		var values []float64
		for _, a := range arms {
			x, err := strconv.ParseFloat(a.Axes[i].Value, 64)
			if err != nil {
				continue axes
			}
			if !slices.Contains(values, x) {
				values = append(values, x)
			}
		}
		if len(values) >= fewValues && slices.IsSorted(values) {
			return i
		}
	}
	return -1
}

// threshold says from which value on an axis all arms are within, place by place on
// the other axes; empty where no place has one, or there are many.
func threshold(arms []*results.Arm, axis int, within map[string]bool) string {
	var places []string
	from := map[string]string{} // place -> least value from which on all are within
	for _, a := range arms {    // values ascend
		var words []string
		for i, at := range a.Axes {
			if i != axis {
				words = append(words, at.Axis+" "+at.Value)
			}
		}
		place := strings.Join(words, ", ")
		start, known := from[place]
		if !known {
			places = append(places, place)
		}
		switch {
		case !within[a.Slug]:
			from[place] = ""
		case start == "":
			from[place] = a.Axes[axis].Value
		}
	}
	var order []string
	at := map[string][]string{}
	some := false
	for _, place := range places {
		v := from[place]
		if at[v] == nil {
			order = append(order, v)
		}
		at[v] = append(at[v], place)
		some = some || v != ""
	}
	if !some || len(places) > mostPlaces {
		return ""
	}
	parts := make([]string, len(order))
	for i, v := range order {
		parts[i] = "from " + v + " on"
		if v == "" {
			parts[i] = "from none on"
		}
		if places[0] != "" {
			parts[i] += " at " + list(at[v])
		}
	}
	return fmt.Sprintf("Along %s, all that were tried stay within the margin %s.", arms[0].Axes[axis].Axis, strings.Join(parts, "; "))
}
