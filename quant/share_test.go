package quant

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"
)

// helped calls f with teams of one to seven workers, the caller among them, who share
// products of any size. No goroutine outlives it.
func helped(t testing.TB, workers int, f func(*Team)) {
	t.Helper()
	defer goleak.VerifyNone(t, goleak.IgnoreCurrent())
	team, stop := NewTeam(workers-1), make(chan struct{})
	team.from = 1
	var done sync.WaitGroup
	for range workers - 1 {
		done.Go(func() { team.Help(stop) })
	}
	for team.Idle() < workers-1 {
		time.Sleep(time.Microsecond)
	}
	f(team)
	close(stop)
	done.Wait()
	if n := team.Idle(); n != 0 {
		t.Errorf("%d helpers are booked as idle, all have left", n)
	}
}

// TestSharedProducts forms products of every order, point and kind of data alone and
// with 1, 2, 3 and 7 workers: bits and counts are equal.
func TestSharedProducts(t *testing.T) {
	points := innerPoints(t)
	for _, order := range testOrders {
		for _, workers := range []int{1, 2, 3, 7} {
			r := rand.New(rand.NewPCG(uint64(workers), uint64(order.Kind)<<8|uint64(order.K)))
			helped(t, workers, func(team *Team) {
				for n, sum := range points[:len(points)-1] {
					if testing.Short() && (n+workers)%4 > 0 {
						continue
					}
					acc := Accumulate{Sum: *sum, Order: order, Through32: r.IntN(4) == 0 && order.Kind != Wide}
					if r.IntN(4) > 0 {
						acc.Product = points[r.IntN(len(points))]
					}
					if r.IntN(4) == 0 {
						acc.Product, acc.Sum = points[2], *points[2] // the machine's own
					}
					if r.IntN(3) == 0 {
						acc.Outer = points[r.IntN(len(points)-1)]
					}
					a, b := kindsOfData[n%len(kindsOfData)], kindsOfData[r.IntN(len(kindsOfData))]
					i, j, k := 1+r.IntN(20), 1+r.IntN(90), 1+r.IntN(9)
					if r.IntN(3) == 0 {
						i, j = 1+r.IntN(60), 1+r.IntN(12)
					}
					label := fmt.Sprintf("%s x %s, %d workers", a.name, b.name, workers)
					if r.IntN(4) == 0 {
						sharedAgainstAlone(t, acc, randomProduct[float64](r, i, j, k, a.draw, b.draw), team, label)
					} else {
						sharedAgainstAlone(t, acc, randomProduct[float32](r, i, j, k, a.draw, b.draw), team, label)
					}
				}
			})
		}
	}
}

// TestSharedFastProducts does the same for everything that the kernels serve, with
// products of several panels, blocks of terms and groups of rows.
func TestSharedFastProducts(t *testing.T) {
	for n, text := range fastTexts {
		acc, err := ParseAccumulate(text)
		if err != nil {
			t.Fatal(err)
		}
		r := rand.New(rand.NewPCG(uint64(n), 17))
		helped(t, 1+n%7, func(team *Team) {
			for round := range 4 {
				if testing.Short() && (n+round)%4 > 0 {
					continue
				}
				a, b := kindsOfData[(n+round)%len(kindsOfData)], kindsOfData[r.IntN(len(kindsOfData))]
				p := randomProduct[float32](r, 1+r.IntN(40), 1+r.IntN(200), 1+r.IntN(40), a.draw, b.draw)
				if round == 3 {
					p = randomProduct[float32](r, 1+r.IntN(90), 1+r.IntN(40), 500+r.IntN(100), a.draw, b.draw)
				}
				sharedAgainstAlone(t, acc, p, team, text)
			}
		})
	}
}

func sharedAgainstAlone[T Element](t *testing.T, acc Accumulate, p Product[T], team *Team, label string) {
	t.Helper()
	m, err := NewMultiplier[T](acc)
	if err != nil {
		t.Fatalf("%v: %v", acc, err)
	}
	var counts, shared [2]Counts
	m.Mul(p, &counts[0], &counts[1])
	alone := append([]T(nil), p.C...)
	for i := range p.C {
		p.C[i] = T(math.NaN())
	}
	m.Share(team)
	m.Mul(p, &shared[0], &shared[1])
	for n, w := range alone {
		if math.Float64bits(float64(p.C[n])) != math.Float64bits(float64(w)) {
			t.Fatalf("%v, %s, %dx%dx%d: element (%d,%d): %v shared, %v alone", acc, label, p.I, p.J, p.K, n/p.J, n%p.J, p.C[n], w)
		}
	}
	if counts != shared {
		t.Fatalf("%v, %s, %dx%dx%d: counts %+v shared, %+v alone", acc, label, p.I, p.J, p.K, shared, counts)
	}
	m.Mul(p, nil, nil) // nobody counts
}

// TestCuts: the parts of a product cover it, none is empty, and all but the last end
// where panels or tiles do.
func TestCuts(t *testing.T) {
	for i := 1; i < 70; i++ {
		for j := 1; j < 300; j += 1 + j/20 {
			for n := 1; n < 9; n++ {
				c := cutting(i, j, n)
				all := j
				if c.byRows {
					all = i
				}
				parts := min(n, c.units)
				at := 0
				for k := range parts {
					from, to := c.bounds(k, parts, all)
					if from != at || to <= from || to > all || to < all && to%c.unit != 0 {
						t.Fatalf("%dx%d among %d: part %d is %d to %d of %d", i, j, parts, k, from, to, all)
					}
					at = to
				}
				if at != all {
					t.Fatalf("%dx%d among %d: the parts end at %d of %d", i, j, parts, at, all)
				}
			}
		}
	}
}

// TestHelpersLeave: helpers go as soon as they are told to, and products go on
// without them; many goroutines may share with one team.
func TestHelpersLeave(t *testing.T) {
	defer goleak.VerifyNone(t, goleak.IgnoreCurrent())
	acc, err := ParseAccumulate("product fp16; sum fp16")
	if err != nil {
		t.Fatal(err)
	}
	team := NewTeam(3)
	team.from = 1
	var owners, helpers sync.WaitGroup
	ctx, stop := context.WithCancel(t.Context())
	for n := range 3 {
		owners.Go(func() {
			r := rand.New(rand.NewPCG(uint64(n), 3))
			p := randomProduct[float32](r, 20, 100, 30, kindsOfData[0].draw, kindsOfData[0].draw)
			m, _ := NewMultiplier[float32](acc)
			m.Share(team)
			for ctx.Err() == nil {
				m.Mul(p, nil, nil)
			}
		})
	}
	for round := range 50 {
		leave := make(chan struct{})
		for range 1 + round%3 {
			helpers.Go(func() { team.Help(leave) })
		}
		time.Sleep(time.Millisecond)
		close(leave)
		helpers.Wait()
	}
	if n := team.Idle(); n != 0 {
		t.Errorf("%d helpers are booked as idle, all have left", n)
	}
	stop()
	owners.Wait()
}

// TestHelpersPanic: a panic in a helper's part reaches the goroutine whose product it
// is, and the helper lives on.
func TestHelpersPanic(t *testing.T) {
	acc, err := ParseAccumulate("product fp16; sum fp16")
	if err != nil {
		t.Fatal(err)
	}
	helped(t, 2, func(team *Team) {
		m, _ := NewMultiplier[float32](acc)
		m.Share(team)
		r := rand.New(rand.NewPCG(1, 5))
		p := randomProduct[float32](r, 8, 200, 9, kindsOfData[0].draw, kindsOfData[0].draw)
		good := p.B
		for _, from := range []int{0, 150} { // the caller's part, the helper's
			p.B = broken{from, good}
			func() {
				defer func() {
					if text, _ := recover().(string); !strings.Contains(text, "a broken operand") {
						t.Errorf("from column %d: the panic was %q", from, text)
					}
				}()
				m.Mul(p, nil, nil)
			}()
		}
		p.B = good
		m.Mul(p, nil, nil)
	})
}

// broken is an operand that panics from a column on.
type broken struct {
	from int
	Columns[float32]
}

func (b broken) Pack(dst []float32, width, k0, k1, j0, j1 int) {
	if j1 > b.from {
		panic("a broken operand")
	}
	b.Columns.Pack(dst, width, k0, k1, j0, j1)
}

// TestSharedAllocations: after the first, a shared product allocates nothing.
func TestSharedAllocations(t *testing.T) {
	acc, err := ParseAccumulate("product fp16; sum fp16 stochastic")
	if err != nil {
		t.Fatal(err)
	}
	helped(t, 3, func(team *Team) {
		m, _ := NewMultiplier[float32](acc)
		m.Share(team)
		r := rand.New(rand.NewPCG(1, 5))
		p := randomProduct[float32](r, 16, 300, 40, kindsOfData[0].draw, kindsOfData[0].draw)
		p.Scale = nil
		var counts Counts
		if n := testing.AllocsPerRun(100, func() { m.Mul(p, &counts, &counts) }); n > 0 {
			t.Errorf("%v allocations a product", n)
		}
	})
}
