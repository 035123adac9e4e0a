package report

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/results"
)

// advice is what the study says about one rounding point.
type advice struct {
	at       station
	setting  results.Setting // the widest over the layers, of the arm it comes from
	mixed    bool            // the arm's layers differ
	arm      *armView        // nil: no arm within the margin is narrower than the baseline
	base     results.Setting
	alone    bool     // the arm differs from the baseline at this point only
	narrower []string // arms with fewer bits here that were not shown to stay within
}

// recommendation is what the section says.
type recommendation struct {
	Lead  []string
	Table *tabular
}

// recommendSection is, for each rounding point, the fewest bits among the arms
// within the margin.
func recommendSection(v *view) any { return v.recommendation() }

func (v *view) recommendation() recommendation {
	var data recommendation
	best := v.leanest()
	switch {
	case len(v.Comparisons) == 0:
		data.Lead = []string{"No arm has been compared with the baseline: nothing can be recommended."}
		return data
	case best == nil:
		data.Lead = []string{"No arm is shown to stay within the margin: nothing narrower than the baseline can be recommended from this study."}
		return data
	}
	c := best.Comparison
	lead := fmt.Sprintf("As a whole, %s is the arm within the margin with the fewest bits a stored value (%s)", best.Label(), bits(best.Bits))
	if !v.storesFewer(best) {
		lead = "No arm within the margin stores fewer bits than the baseline; the one that computes with the fewest is " + best.Label()
	}
	data.Lead = append(data.Lead, fmt.Sprintf("%s: difference to the baseline %s%s %s, n = %d.",
		lead, v.words.diff(c.Mean), v.words.unit(), v.words.interval(c.Low, c.High), c.N))
	data.Lead = append(data.Lead, "The table asks point by point. An arm is evidence for all its settings together, not for each by itself: rows of different arms have not been tested in one arm, and must be before they are used so. "+
		"Where the evidence is \"alone\", the arm differs from the baseline at that point only.")
	data.Table = v.adviceTable()
	return data
}

// adviceTable has a row for points that share arm, format, rounding and order.
func (v *view) adviceTable() *tabular {
	t := &tabular{
		Caption: "The fewest bits within the margin, point by point",
		Columns: columns("Rounding points", "format", "rounding", "sum", "arm: difference"+commaShort(v)+", interval, n", "evidence", "narrower, not shown to stay within"),
	}
	type group struct {
		key    string
		points []string
		advice
	}
	var groups []*group
	for _, a := range v.advices() {
		slug := ""
		if a.arm != nil {
			slug = a.arm.Slug
		}
		key := strings.Join([]string{slug, a.setting.Format, a.setting.Rounding, a.setting.Order, strings.Join(a.narrower, ","), fmt.Sprint(a.mixed, a.alone)}, "\x00")
		i := slices.IndexFunc(groups, func(g *group) bool { return g.key == key })
		if i < 0 {
			i = len(groups)
			groups = append(groups, &group{key: key, advice: a})
		}
		groups[i].points = append(groups[i].points, pointName(a.at))
	}
	for _, g := range groups {
		s := g.setting
		format := fmt.Sprintf("%s, %d bits", plain(s.Format), s.Bits)
		if g.mixed {
			format += ", narrower in some layers"
		}
		row := []string{
			strings.Join(g.points, "; "), format, plain(s.Rounding), orMissing(plain(s.Order)), "the baseline",
			"nothing narrower within", orMissing(strings.Join(g.narrower, ", ")),
		}
		if g.arm != nil {
			c := g.arm.Comparison
			row[4] = fmt.Sprintf("%s: %s %s, n = %d", g.arm.Label(), v.words.diff(c.Mean), v.words.interval(c.Low, c.High), c.N)
			row[5] = "the whole arm"
			if g.alone {
				row[5] = "alone"
			}
		}
		t.Rows = append(t.Rows, row)
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// commaShort is the unit of differences for a column's head.
func commaShort(v *view) string {
	if u := v.words.short(); u != "" {
		return ", " + u
	}
	return ""
}

// orMissing is s, or a dash.
func orMissing(s string) string {
	if s == "" {
		return missing
	}
	return s
}

// pointName spells a station as plans do: "forward.weight".
func pointName(s station) string {
	if s.phase == s.point {
		return s.point
	}
	return strings.ReplaceAll(s.phase, " ", "_") + "." + s.point
}

// advices goes through the points that any arm sets, in order of computation.
func (v *view) advices() []advice {
	var out []advice
	if v.baseline == nil {
		return nil
	}
	at := mapStations(v)
	for i, st := range at {
		base, _, there := widest(v.baseline, st)
		if !there {
			continue // the baseline only takes over what another point rounded
		}
		a := advice{at: st, base: base, setting: base}
		for _, arm := range v.others() {
			s, mixed, there := widest(arm, st)
			if !there || s.Bits >= base.Bits {
				continue
			}
			k, ok := arm.kind()
			if ok && k == results.Within && (a.arm == nil || s.Bits < a.setting.Bits || s.Bits == a.setting.Bits && arm.Bits < a.arm.Bits) {
				a.arm, a.setting, a.mixed = arm, s, mixed
			}
		}
		for _, arm := range v.others() {
			s, _, there := widest(arm, st)
			if k, ok := arm.kind(); there && s.Bits < a.setting.Bits && !(ok && k == results.Within) {
				a.narrower = append(a.narrower, fmt.Sprintf("%s (%s, %s)", arm.Label(), plain(s.Format), shortVerdict(arm)))
			}
		}
		if a.arm != nil {
			a.alone = v.changesOnly(a.arm, at, i)
		}
		out = append(out, a)
	}
	return out
}

// shortVerdict is an arm's verdict without the pairs it needs.
func shortVerdict(a *armView) string {
	switch {
	case a.Comparison == nil:
		return "no verdict"
	case a.Comparison.Verdict.Kind == results.Undecided:
		return "undecided"
	}
	return verdictWords(a.Comparison.Verdict)
}

// widest is an arm's setting with the most bits at a station, over its layers;
// mixed says that they differ. Points that take over other values do not count.
func widest(a *armView, st station) (s results.Setting, mixed, there bool) {
	for _, x := range a.Settings {
		if stationOf(x.Point) != st || x.Rounding == reused || x.Bits <= 0 {
			continue
		}
		if there && differs(x, s) {
			mixed = true
		}
		if !there || x.Bits > s.Bits {
			s = x
		}
		there = true
	}
	return s, mixed, there
}

// changesOnly reports whether an arm differs from the baseline at station i only.
func (v *view) changesOnly(a *armView, at []station, i int) bool {
	stops := v.stops(a, at)
	return stops[i].changed && !slices.ContainsFunc(slices.Delete(slices.Clone(stops), i, i+1), func(s stop) bool { return s.changed })
}
