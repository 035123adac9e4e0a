package plan

import "cmp"

// Of two settings that speak about one rounding point the more specific one
// holds, wherever they stand in the file. How specific a setting is has two
// sides: where it applies (a setting for one layer beats one for all layers),
// and, among settings of equal reach, how many points its key names. Two equally
// specific settings on one point are an error, because no rule could tell which
// of them the author meant.
type specificity struct {
	where reach
	what  breadth
}

// reach is which layers a setting speaks about, the least specific first.
type reach uint8

const (
	allLayers reach = iota
	ofKind          // select = "conv1d"
	ofName          // select = "dense 16"
	atEnd           // select = "first" or "last"
	atIndex         // select = 3
)

// breadth is how many points a key names, the widest first.
type breadth uint8

const (
	inherited breadth = iota // not set in this arm: from the baseline
	broad                    // everything
	partial                  // storage, accumulate
	pointwise                // a point's own key; operand counts as the two keys it stands for
)

// compare is negative when s is less specific than t.
func (s specificity) compare(t specificity) int {
	return cmp.Or(cmp.Compare(s.where, t.where), cmp.Compare(s.what, t.what))
}
