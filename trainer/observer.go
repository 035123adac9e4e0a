package trainer

import (
	"math"

	"ulpine/quant"
)

// exponentSpan is the number of exponent fields of binary64.
const exponentSpan = 2048

// observer collects findings. It only reads what the training holds, so a training
// has the same bits with and without one.
type observer struct {
	set      Diagnostics
	net      *Network
	points   [][pointCount]*seen // entry i+1 is layer i
	sums     [][pointCount]SumFinding
	updates  []UpdateFinding
	found    *Findings
	before   []float64
	at       []int
	last     lastLooks
	brief    bool // the step is looked at because its epoch ends: at less
	column32 []float32
	column64 []float64
}

// seen are the tallies of one point in an epoch.
type seen struct {
	PointFinding
	exponents [exponentSpan]uint64
	low, high int // fields between which there are any: [low, high)
}

func newObserver(d Diagnostics, net *Network) *observer {
	if d.Values == 0 {
		d.Values = DefaultDiagnostics.Values
	}
	if d.Sums == 0 {
		d.Sums = DefaultDiagnostics.Sums
	}
	n := len(net.Layers) + 1
	return &observer{
		set: d, net: net, found: &Findings{}, points: make([][pointCount]*seen, n), sums: make([][pointCount]SumFinding, n),
		before: make([]float64, d.Values), at: make([]int, d.Values),
	}
}

// moment is a step's place in a training: its number from 1, how many steps of its
// epoch came before it, whether it is the epoch's or the training's last.
type moment struct {
	step      uint32
	before    uint32
	epochEnds bool
	runEnds   bool
}

// lastLooks are the steps in which was last looked at tensors and compared gradients.
type lastLooks struct{ tensors, gradients uint32 }

// due is the observer in steps that are looked at, else nil.
func (w *observer) due(m moment) *observer {
	if w == nil || !m.falls(w.set.Every, 0, &w.last.tensors) {
		return nil
	}
	w.brief = m.step%uint32(w.set.Every) != 0
	return w
}

// comparesGradients reports whether gradients are compared in a step.
func (w *observer) comparesGradients(m moment) bool {
	return w != nil && m.falls(w.set.Gradient, w.set.Pause, &w.last.gradients)
}

// falls reports whether something done in every n-th step is due: never for n = 0,
// and else also in the last step of an epoch that has not seen it, if the last time,
// which it keeps, is more than so many steps ago or the training ends.
func (m moment) falls(n, pause int, last *uint32) bool {
	unseen := m.epochEnds && *last+m.before < m.step && (m.runEnds || m.step-*last > uint32(pause))
	if n == 0 || m.step%uint32(n) != 0 && !unseen {
		return false
	}
	*last = m.step
	return true
}

// choose picks places of a tensor of n values: at most the given number, a quarter of
// it in a brief look, and of large tensors a sixteenth, spread evenly. It returns how
// many.
func (w *observer) choose(n int) int {
	values := w.set.Values
	if w.brief {
		values = max(values/4, 1)
	}
	count := min(values, max(n/16, min(n, 32)))
	for i := range count {
		w.at[i] = int(uint64(i) * uint64(n) / uint64(count))
	}
	return count
}

// look keeps chosen values of a tensor about to be rounded.
func look[S quant.Element](w *observer, src []S) {
	for i, at := range w.at[:w.choose(len(src))] {
		w.before[i] = float64(src[at])
	}
}

// lookCombined keeps chosen results about to be rounded.
func lookCombined[A, B quant.Element](w *observer, a []A, b []B, how arithmetic) {
	mask := -1
	if len(b) == 1 {
		mask = 0
	}
	for i, at := range w.at[:w.choose(len(a))] {
		w.before[i], _ = valueAndRest(float64(a[at]), float64(b[at&mask]), how)
	}
}

// compare tallies the values kept by look with what they were rounded to.
func compare[D quant.Element](w *observer, layer int, id PointID, dst []D, point *quant.Point) {
	s := w.point(layer, id)
	l := point.Format.Limits()
	for i, at := range w.at[:w.choose(len(dst))] {
		s.count(w.before[i], float64(dst[at]), l.Lowest, l.Max)
	}
}

func (w *observer) point(layer int, id PointID) *seen {
	s := &w.points[layer+1][id]
	if *s == nil {
		*s = &seen{}
	}
	return *s
}

// count tallies one value and its rounding.
func (s *seen) count(x, y, lowest, largest float64) {
	s.Values++
	finite := x-x == 0
	switch {
	case x == 0:
		s.Zeros++
	case finite:
		s.bar(int(math.Float64bits(x) >> 52 & (exponentSpan - 1)))
	}
	switch {
	case y != y:
		s.NaN++
		if finite {
			s.Overflow++
		}
	case finite && y-y != 0:
		s.Overflow++
	case x > largest && y == largest || x < lowest && y == lowest:
		s.Saturated++
	case y == 0 && x != 0:
		s.Underflow++
	}
	if d := y - x; d-d == 0 {
		s.Signal += float64(x * x)
		s.Noise += float64(d * d)
	}
}

// bar adds a value to the bar of an exponent field.
func (s *seen) bar(field int) {
	if s.low == s.high {
		s.low, s.high = field, field+1
	}
	s.low, s.high = min(s.low, field), max(s.high, field+1)
	s.exponents[field]++
}

// productsOfSum is about how many products of a long sum are looked at.
const productsOfSum = 32

// lookSums recomputes some sums of a finished product of matrices, in twice the
// bits of binary64, and counts what rounding makes of their terms.
func lookSums[T quant.Element](w *observer, layer int, productID, sumID PointID, acc *quant.Accumulate, q *quant.Product[T]) {
	column := columnOf[T](w, q.K)
	f := &w.sums[layer+1][sumID]
	stride := max(8, q.K/productsOfSum)
	count := w.set.Sums
	if w.brief {
		count = 1
	}
	for n := range min(count, q.I*q.J) {
		at := int(uint64(n) * uint64(q.I*q.J) / uint64(count))
		i, j := at/q.J, at%q.J
		q.B.Pack(column, 1, 0, q.K, j, j+1)
		var high, low float64
		for k, b := range column {
			a := float64(q.A.At(i, k))
			p, rest := valueAndRest(a, float64(b), product)
			if p == 0 || q.B.Padded(k, j) {
				continue
			}
			if acc.Product != nil && k%stride == 0 {
				y, _ := acc.Product.Round(quant.ExactProduct(a, float64(b)), 1<<31)
				l := acc.Product.Format.Limits()
				w.point(layer, productID).count(p, y, l.Lowest, l.Max)
			}
			high, low = addTwice(high, low, p, rest)
		}
		if q.Scale != nil {
			p, rest := valueAndRest(high, q.Scale[i], product)
			high, low = p, float64(low*q.Scale[i])+rest
		}
		if q.Bias != nil {
			high, low = addTwice(high, low, float64(q.Bias[i]), 0)
		}
		exact, got := high+low, float64(q.C[i*q.J+j])
		f.Count++
		f.Terms += uint64(q.K)
		if cross := float64(got * exact); cross-cross == 0 {
			f.Cross += cross
			f.Squares += float64(exact * exact)
		}
	}
}

// addTwice adds x + rest to a sum of two parts.
func addTwice(high, low, x, rest float64) (float64, float64) {
	s, e := valueAndRest(high, x, sum)
	return s, low + (e + rest)
}

func columnOf[T quant.Element](w *observer, n int) []T {
	var column any
	if _, single := any(T(0)).(float32); single {
		if len(w.column32) < n {
			w.column32 = make([]float32, n)
		}
		column = w.column32[:n]
	} else {
		if len(w.column64) < n {
			w.column64 = make([]float64, n)
		}
		column = w.column64[:n]
	}
	return column.([]T)
}

// remember names the parameter with a number among the updates.
func (w *observer) remember(number, layer int, name string) {
	for len(w.updates) <= number {
		w.updates = append(w.updates, UpdateFinding{})
	}
	w.updates[number].Layer, w.updates[number].Param = layer, name
}

// moved compares masters before and after an update with the steps they were to
// take, which are subtracted.
func moved[T quant.Element](w *observer, number int, old, step, master []T) {
	f := &w.updates[number]
	for _, at := range w.at[:w.choose(len(step))] {
		intended, applied := float64(step[at]), float64(old[at])-float64(master[at])
		if intended == 0 || applied-applied != 0 || intended-intended != 0 {
			continue
		}
		f.Count++
		f.Cross += float64(applied * intended)
		f.Squares += float64(intended * intended)
		f.Excess += applied - intended
		f.Intended += math.Abs(intended)
		if applied == 0 {
			f.Unmoved++
		}
	}
}

// end closes an epoch.
func (w *observer) end(epoch int) {
	for i := range w.points {
		layer, name := i-1, ""
		if layer >= 0 {
			name = w.net.Layers[layer].Name
		}
		for id := range w.points[i] {
			if s := w.points[i][id]; s != nil && s.Values > 0 {
				s.Epoch, s.Layer, s.Name, s.Point = epoch, layer, name, PointID(id).String()
				w.found.Points = append(w.found.Points, s.finished())
			}
			if f := w.sums[i][id]; f.Count > 0 {
				f.Epoch, f.Layer, f.Name, f.Point = epoch, layer, name, PointID(id).String()
				w.found.Sums = append(w.found.Sums, f)
				w.sums[i][id] = SumFinding{}
			}
		}
	}
	for _, f := range w.updates {
		if f.Count > 0 {
			f.Epoch = epoch
			w.found.Updates = append(w.found.Updates, f)
		}
	}
	w.updates = w.updates[:0]
}

// finished lists the histogram's bars and clears the tallies. Subnormals share the
// lowest bar.
func (s *seen) finished() PointFinding {
	f := s.PointFinding
	f.Exponents = make([]ExponentCount, 0, s.high-s.low)
	for field := s.low; field < s.high; field++ {
		if n := s.exponents[field]; n > 0 {
			f.Exponents = append(f.Exponents, ExponentCount{field - 1023, n})
		}
	}
	clear(s.exponents[s.low:s.high])
	s.PointFinding, s.low, s.high = PointFinding{}, 0, 0
	return f
}
