package trainer

import (
	"ulpine/quant"
	"ulpine/quant/random"
)

// tally holds the counts of range events: entry i+1 is layer i, entry 0 the
// input and the loss.
type tally [][pointCount]quant.Counts

// gradientEvents counts what a dynamic loss scale takes for a sign that S is too
// large: overflows, saturations and NaNs where gradients live.
func (t tally) gradientEvents() (events uint64) {
	for layer := range t {
		for _, id := range gradientPoints {
			c := &t[layer][id]
			events += c.Overflow + c.Saturated + c.NaN
		}
	}
	return events
}

// pass is one walk through the network, forward and maybe backward: everything
// that its layers have in common.
type pass struct {
	seed    uint64 // the replicate's rounding key
	step    uint32 // training step, the first is 1; the epoch in an evaluation
	phase   uint32
	watch   *observer // nil: nobody looks at this step
	dropout uint64    // the replicate's key of dropout masks
	samples int       // examples in this batch
	first   uint64    // number of the batch's first example in its data set; 0 in training
	tally   tally     // nil in an evaluation: only training is counted
}

// draws addresses the random words of an operation of a layer.
func (p *pass) draws(layer int, o operation) quant.Draws {
	return quant.Draws{Seed: p.seed, Step: p.step, Site: site(layer, o), Phase: p.phase}
}

// groupStreams is the number of the stream of group 0; the package random's own
// streams lie far below.
const groupStreams = 1 << 16

// partStreams is the number of the stream of part 0 of a layer, beyond those of groups.
const partStreams = 1 << 31

// group is the streams of group n of a layer's channels: those given for the first,
// for the others the same under a key derived from theirs and n, because rows are
// counted within a group.
func (p *pass) group(n int, s quant.Streams) quant.Streams {
	if n > 0 {
		s.Row.Seed = random.Derive(s.Row.Seed, random.Stream(groupStreams+n))
		s.Column.Seed = s.Row.Seed
	}
	return s
}

// place is a layer's position in the network and its arithmetic: what turns a
// pass into draws and counts.
type place struct {
	layer int
	set   *Arithmetic
	// part is the number of a part of a layer that forms several products: the
	// projections of an attention layer, the times of a recurrent one. Every part but
	// the first draws its words from a key of its own, because all parts count
	// operations and elements as a layer does.
	part int
}

// key is the key that a part draws under, where the layer draws under seed.
func (pl place) key(seed uint64) uint64 {
	if pl.part > 0 {
		return random.Derive(seed, random.Stream(partStreams+pl.part))
	}
	return seed
}

func (pl place) draws(p *pass, o operation) quant.Draws {
	d := p.draws(pl.layer, o)
	d.Seed = pl.key(d.Seed)
	return d
}

func (pl place) streams(p *pass, o operation) quant.Streams { return streams(pl.draws(p, o)) }

// counts is where the events of a point go; nil when they are not counted.
func (pl place) counts(p *pass, id PointID) *quant.Counts {
	if p.tally == nil {
		return nil
	}
	return &p.tally[pl.layer+1][id]
}

// combined is combine as an operation of a layer.
func combined[T quant.Element](pl place, p *pass, id PointID, o operation, dst, a, b []T, how arithmetic, point *quant.Point, first uint64) {
	if p.watch != nil {
		lookCombined(p.watch, a, b, how)
	}
	combine(dst, a, b, how, point, pl.draws(p, o), first, pl.counts(p, id))
	if p.watch != nil {
		compare(p.watch, pl.layer, id, dst, point)
	}
}

// round is the one road by which a tensor becomes a stored tensor: dst =
// R[point](src), element 0 being number first of the tensor.
func round[D, S quant.Element](pl place, p *pass, id PointID, o operation, dst []D, src []S, point *quant.Point, first uint64) {
	if p.watch != nil {
		look(p.watch, src)
	}
	quant.RoundSlice(dst, src, point, pl.draws(p, o), first, pl.counts(p, id))
	if p.watch != nil {
		compare(p.watch, pl.layer, id, dst, point)
	}
}
