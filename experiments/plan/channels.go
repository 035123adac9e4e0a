package plan

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/quant"
	"ulpine/trainer"
)

// readRange reads range = [from, to] with bits: the codes of a converter in place of
// a format's word, or returns nil.
func (r *reader) readRange(n *node) quant.Format {
	before := len(r.errs)
	at := n.table["range"]
	if word := n.table["format"]; word != nil {
		r.fail(word.errorf("keep one of them", "a format and a range: a range with bits is a format of its own"))
	}
	if n.table["bits"] == nil {
		r.fail(at.errorf("write range = [-40, 85], bits = 12", "bits are missing"))
	}
	bits := r.whole(n, "bits", 12, 1, 16)
	if len(at.list) != 2 {
		r.wrongType(at, "an array of two numbers", "range = [-40, 85], bits = 12")
		return nil
	}
	from, to := r.numberAt(at.list[0], "range", 0), r.numberAt(at.list[1], "range", 1)
	if len(r.errs) > before {
		return nil
	}
	f, err := quant.NewADC(int(bits), from, to)
	if err != nil {
		r.fail(fault(at, err))
		return nil
	}
	return f
}

// channelKey says which channels of the input an entry is for.
const channelKey = "channels"

// readChannels reads input as an array of settings, each for some channels of the
// input, or, without channels, for all others.
func (r *reader) readChannels(n *node, shape []int, fs formats) (v value, ok bool) {
	before := len(r.errs)
	count := 0
	if len(shape) > 0 {
		count = shape[0]
	}
	holders := make([]*node, count) // by channel
	points := make([]quant.Point, count)
	var others *node
	var rest quant.Point
	for _, entry := range n.list {
		if entry.table == nil {
			r.wrongType(entry, "a table", `input = [{ channels = [1, 2], format = "Q2.6" }, { format = "bf16" }]`)
			continue
		}
		at := entry.table[channelKey]
		one, _ := r.readValue(entry.without(channelKey), stored, fs)
		switch {
		case at == nil && others != nil:
			r.fail(entry.errorf("name channels in one of them", "all other channels have a setting in %s line %d already", others.file, others.line))
		case at == nil:
			others, rest = entry, one.point
		default:
			for _, c := range r.channelNumbers(at, count) {
				if twin := holders[c]; twin != nil {
					r.fail(at.errorf("keep one of them", "channel %d has a setting in %s line %d already", c+1, twin.file, twin.line))
				}
				holders[c], points[c] = entry, one.point
			}
		}
	}
	var missing []string
	for c := range points {
		if holders[c] == nil {
			points[c] = rest
			missing = append(missing, fmt.Sprint(c+1))
		}
	}
	if count == 0 || len(r.errs) > before {
		return v, false
	}
	switch {
	case others == nil && len(missing) > 0:
		r.fail(n.errorf(`add an entry without channels, as { format = "bf16" }, for all others`, "no setting for channel %s of %d", strings.Join(missing, ", "), count))
	case others != nil && len(missing) == 0:
		r.fail(others.errorf("remove it", "the setting is for all other channels, but every channel has its own"))
	}
	v.point, v.channels = points[0], points
	return v, len(r.errs) == before
}

// channelNumbers reads one number or an array of them; the first channel is 1.
func (r *reader) channelNumbers(n *node, count int) (all []int) {
	numbers := []*node{n}
	if n.list != nil {
		numbers = n.list
	}
	if len(numbers) == 0 {
		r.fail(n.errorf("write channels = [1, 2], or leave it out for all others", "no channel"))
	}
	for _, one := range numbers {
		c, whole := one.value.(int64)
		switch {
		case !whole:
			r.wrongType(one, "a channel's number", "channels = [1, 2]")
		case (c < 1 || c > int64(count)) && count > 0:
			r.fail(n.errorf(fmt.Sprintf("write 1 to %d", count), "there is no channel %d: an example has %d", c, count))
		case count > 0:
			all = append(all, int(c-1))
		}
	}
	return all
}

// without is a table without one of its keys.
func (n *node) without(key string) *node {
	own := *n
	own.table = map[string]*node{}
	for k, v := range n.table {
		if k != key {
			own.table[k] = v
		}
	}
	return &own
}

// channelPoints are the points of the input's channels; nil where all are one.
func (v value) channelPoints() []quant.Point {
	for _, p := range v.channels {
		if !samePoint(p, v.channels[0]) {
			return slices.Clone(v.channels)
		}
	}
	return nil
}

// channelGroups are the channels of each point, in words: "1+2", and the points.
func channelGroups(points []quant.Point) (names []string, each []quant.Point) {
	for c, p := range points {
		k := slices.IndexFunc(each, func(q quant.Point) bool { return samePoint(p, q) })
		if k < 0 {
			names, each = append(names, fmt.Sprint(c+1)), append(each, p)
			continue
		}
		names[k] += fmt.Sprintf("+%d", c+1)
	}
	return names, each
}

// inputRows are the rows of the input: one, or one for each way in which channels are
// rounded.
func inputRows(arm *trainer.Arm) []Setting {
	if len(arm.Channels) == 0 {
		return []Setting{pointRow(-1, "input", trainer.Input, arm.Input)}
	}
	var rows []Setting
	names, points := channelGroups(arm.Channels)
	for i, p := range points {
		rows = append(rows, pointRow(-1, "input channel "+names[i], trainer.Input, p))
	}
	return rows
}

// inputText is what the canonical text says of the input.
func inputText(arm *trainer.Arm) string {
	if len(arm.Channels) == 0 {
		return arm.Input.String()
	}
	var parts []string
	names, points := channelGroups(arm.Channels)
	for i := range points {
		parts = append(parts, "channel "+names[i]+" "+points[i].String())
	}
	return strings.Join(parts, ", ")
}
