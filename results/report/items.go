package report

import (
	"slices"
	"strconv"

	"ulpine/results"
)

// compared are the arms against the baseline, then the contrasts.
func (v *view) compared() []results.Comparison {
	return slices.Concat(v.Comparisons, v.Contrasts)
}

// itemTable is what arms said of the same test examples; nil where no predictions
// are stored.
func (v *view) itemTable() *tabular {
	t := &tabular{
		Caption: "Test example by test example: what the arm calls otherwise, summed over pairs" + commaUnit(v),
		Columns: columns("Arm", "#test examples", "#pairs", "#two-way "+percentage(v.Confidence)+" interval", "#% of variance by examples", "#right in the arm only", "#right in the other only", "#called differently"),
	}
	for i, cs := 0, v.compared(); i < len(cs); i++ {
		c := cs[i].Items
		if c == nil {
			continue
		}
		examples := strconv.Itoa(c.Items)
		if !c.Crossed {
			examples += ", new each time"
		}
		row := []string{
			v.pairName(&cs[i]), examples, strconv.Itoa(c.Replicates), v.words.interval(c.Low, c.High), significant(100*c.ItemShare, 2), missing, missing, missing,
		}
		if len(c.Flips) > 0 { // a classification
			row[5], row[6], row[7] = strconv.Itoa(c.Gained), strconv.Itoa(c.Lost), strconv.Itoa(c.Changed)
		}
		t.Rows = append(t.Rows, row)
		if m := plain(c.Method); m != "" && !slices.Contains(t.Notes, m) {
			t.Notes = append(t.Notes, m)
		}
	}
	if len(t.Rows) == 0 {
		return nil
	}
	for i, m := range t.Notes {
		t.Notes[i] = "Two-way interval: " + m + "."
	}
	return t
}

// twoWay spells a comparison's two-way interval; missing where there is none.
func (v *view) twoWay(c *results.Comparison) string {
	if c.Items == nil {
		return missing
	}
	return v.words.interval(c.Items.Low, c.Items.High)
}

// flipRows are the discordant test examples of every pair of runs.
func flipRows(v *view) (rows [][]string) {
	for _, c := range v.compared() {
		if c.Items == nil {
			continue
		}
		for _, f := range c.Items.Flips {
			rows = append(rows, []string{
				c.Arm, c.Against, uintCell(f.Replicate), intCell(c.Items.Items), intCell(f.Gained), intCell(f.Lost), intCell(f.Changed), floatCell(f.P),
			})
		}
	}
	return rows
}
