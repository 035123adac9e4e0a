package quant

import (
	"runtime"
	"sync/atomic"
	"time"

	"ulpine/quant/internal/kernel"
)

// Team lets goroutines that have nothing else to do form parts of the products of
// others. A part is a rectangle of results, never a part of a sum, and every result
// has its own numbers among the random words, so that no bit and no count depends on
// who helps. The zero of *Team, nil, has no helpers.
type Team struct {
	idle  atomic.Int32 // helpers that wait and that nobody has reserved
	tasks chan task    // has room for one for every helper
	from  int          // multiply-adds of the least part
}

// task is work that is handed to a helper.
type task interface{ do() }

// NewTeam returns a team of up to most helpers at a time.
func NewTeam(most int) *Team {
	return &Team{tasks: make(chan task, most), from: shareFrom}
}

// Help forms parts of products until stop is closed, and then returns as soon as the
// part in hand is done.
func (t *Team) Help(stop <-chan struct{}) {
	t.idle.Add(1)
	for {
		k, ok := soon(t.tasks)
		if !ok {
			select {
			case k = <-t.tasks:
			case <-stop:
			}
		}
		if k != nil {
			k.do()
		}
		select {
		case <-stop:
			if t.reserve(1) == 1 {
				return
			}
			// All who wait are reserved, so that a task is on its way.
			(<-t.tasks).do()
		default:
		}
	}
}

// Idle is the number of helpers that wait for work.
func (t *Team) Idle() int { return int(t.idle.Load()) }

// patience is how long to look for something before going to sleep: waking takes up
// to seventy microseconds on a virtual machine, as long as the products of a small
// network.
const patience = 100 * time.Microsecond

// soon receives what comes within patience.
func soon[E any](c <-chan E) (e E, ok bool) {
	for start := time.Now(); time.Since(start) < patience; runtime.Gosched() {
		for range 20 {
			select {
			case e = <-c:
				return e, true
			default:
			}
		}
	}
	return e, false
}

// reserve takes up to n of the helpers that wait; each is sent one task, or freed.
func (t *Team) reserve(n int) int {
	for {
		idle := t.idle.Load()
		take := min(int32(n), idle)
		if take <= 0 {
			return 0
		}
		if t.idle.CompareAndSwap(idle, idle-take) {
			return int(take)
		}
	}
}

// shareFrom is the number of multiply-adds from which a part of a product is worth
// handing to a helper who is awake: three microseconds of the fastest kernels.
const shareFrom = 1 << 18

// partsOf is the number of parts that an I x J x K product may have, the caller's own
// among them.
func (t *Team) partsOf(i, j, k int) int {
	if t == nil {
		return 1
	}
	return min(int(t.idle.Load())+1, i*j*k/t.from)
}

// part is a part of a product in a helper's hands, with a multiplier of its own.
type part[T Element] struct {
	mul            *Multiplier[T]
	team           *Team
	done           chan<- struct{} // takes a token when the part is done
	product        Product[T]
	products, sums Counts
	failure        any // a panic
}

// do implements task.
func (p *part[T]) do() {
	defer func() {
		p.failure = recover()
		p.team.idle.Add(1)
		p.done <- struct{}{}
	}()
	p.products, p.sums = Counts{}, Counts{}
	p.mul.form(&p.product, &p.products, &p.sums)
}

// Share lets a team help with the multiplier's larger products, about a million
// operations upward.
func (m *Multiplier[T]) Share(t *Team) {
	m.team, m.parts = t, nil
	if t != nil {
		m.done = make(chan struct{}, cap(t.tasks))
	}
}

// share forms a product by up to n parts, as many as there are helpers.
func (m *Multiplier[T]) share(p *Product[T], n int, products, sums *Counts) {
	c := cutting(p.I, p.J, n)
	helpers := m.team.reserve(min(n, c.units) - 1)
	n = helpers + 1
	for len(m.parts) < helpers {
		// The accumulation was good for m, so there is no error.
		mul, _ := NewMultiplier[T](m.ref.acc)
		m.parts = append(m.parts, &part[T]{mul: mul, team: m.team, done: m.done})
	}
	for i, h := range m.parts[:helpers] {
		h.product = *p
		h.product.cut(c, i+1, n)
		m.team.tasks <- h
	}
	p.cut(c, 0, n)
	m.formOwn(p, helpers, products, sums)
	for _, h := range m.parts[:helpers] {
		h.product = Product[T]{}
		if h.failure != nil {
			panic(h.failure)
		}
		if products != nil {
			products.Add(h.products)
		}
		if sums != nil {
			sums.Add(h.sums)
		}
	}
}

// formOwn forms the caller's part and waits for the helpers, even in a panic.
func (m *Multiplier[T]) formOwn(p *Product[T], helpers int, products, sums *Counts) {
	defer func() {
		for range helpers {
			if _, ok := soon(m.done); !ok {
				<-m.done
			}
		}
	}()
	m.form(p, products, sums)
}

// cuts says how a product is divided: along its longer side, for the packing of the
// shorter one is done again for every part, into whole panels or tiles.
type cuts struct {
	byRows      bool
	unit, units int
}

// rowUnit is the rows of the tallest tile.
const rowUnit = 8

// cutting divides I x J results among n. Narrow panels serve where wide ones would
// make parts too unequal.
func cutting(i, j, n int) cuts {
	if i > j {
		return cuts{true, rowUnit, (i + rowUnit - 1) / rowUnit}
	}
	wide, narrow := kernel.PanelWidths()
	if j < 4*n*wide {
		wide = narrow
	}
	return cuts{false, wide, (j + wide - 1) / wide}
}

// bounds are the rows, or columns, of part number k of n, of all that there are.
func (c cuts) bounds(k, n, all int) (from, to int) {
	return k * c.units / n * c.unit, min((k+1)*c.units/n*c.unit, all)
}

// cut makes part number k of n of a product.
func (p *Product[T]) cut(c cuts, k, n int) {
	if !c.byRows {
		p.from, p.to = c.bounds(k, n, p.J)
		return
	}
	from, to := c.bounds(k, n, p.I)
	p.I, p.firstI = to-from, uint32(from)
	p.A.Data, p.C = p.A.Data[from*p.A.Row:], p.C[from*p.J:]
	if p.Scale != nil {
		p.Scale = p.Scale[from:]
	}
	if p.Bias != nil {
		p.Bias = p.Bias[from:]
	}
}
