package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
)

// TestLevels holds the boundaries to published ones of the O'Brien-Fleming-type
// spending, two-sided 5 % in equal steps (from memory of the tables that come with
// programs for Lan and DeMets' method): z of 2.963, 1.969 for two looks and 4.877,
// 3.357, 2.680, 2.290, 2.031 for five.
func TestLevels(t *testing.T) {
	for _, c := range []struct {
		looks Looks
		want  []float64
	}{
		{Looks{20, 20}, []float64{1.960}},
		{Looks{20, 10}, []float64{2.963, 1.969}},
		{Looks{20, 4}, []float64{4.877, 3.357, 2.680, 2.290, 2.031}},
	} {
		for k, level := range c.looks.normalLevels(0.025) {
			near(t, "z", -quantileOfNormal(level), c.want[k], 6e-4)
		}
	}
}

// quantileOfNormal inverts the normal law by bisection of erfc.
func quantileOfNormal(p float64) float64 {
	low, high := -40.0, 40.0
	for range 200 {
		if middle := (low + high) / 2; math.Erfc(-middle/math.Sqrt2)/2 < p {
			low = middle
		} else {
			high = middle
		}
	}
	return low
}

// TestTLevelsAreExact simulates t statistics of normal differences, looked at in
// several ways: the rate is alpha, not merely at most that. The levels of the normal
// law, as a check of the check, exceed it.
func TestTLevelsAreExact(t *testing.T) {
	plans := 300_000
	if testing.Short() {
		plans = 60_000
	}
	rng := rand.New(rand.NewPCG(99, 5))
	rate := func(l Looks, levels []float64) float64 {
		at, hits := l.At(), 0
		bounds := make([]float64, len(at))
		for k, n := range at {
			bounds[k] = tBound(levels[k], n)
		}
		for range plans {
			var sum, squares float64
			n := 0
			for k, look := range at {
				for ; n < look; n++ {
					x := rng.NormFloat64()
					sum, squares = sum+x, squares+x*x
				}
				if sum/math.Sqrt(float64(n)*squares) > bounds[k] {
					hits++
					break
				}
			}
		}
		return float64(hits) / float64(plans)
	}
	for _, l := range []Looks{{40, 5}, {30, 2}, {12, 5}, {10, 1}} {
		for _, alpha := range []float64{0.025, 0.1} {
			near(t, "rate", rate(l, l.tLevels(alpha)), alpha, slack(alpha, plans))
		}
	}
	if !slices.Equal(Looks{300, 100}.Levels(0.025), Looks{300, 100}.normalLevels(0.025)) || !slices.Equal(Looks{12, 5}.Levels(0.025), Looks{12, 5}.tLevels(0.025)) {
		t.Error("few pairs take the levels of t, many those of the normal law")
	}
	l := Looks{10, 1}
	if got := rate(l, l.normalLevels(0.025)); got < 0.027 {
		t.Errorf("the normal law's levels give %v", got)
	}
}

// TestTLevels: one look spends all, and many pairs give the levels of the normal
// law.
func TestTLevels(t *testing.T) {
	near(t, "one look", Looks{9, 9}.tLevels(0.025)[0], 0.025, 1e-9)
	few, normal := Looks{40, 5}.tLevels(0.025), Looks{40, 5}.normalLevels(0.025)
	if last := len(few) - 1; !(few[last] < normal[last]) || few[last] < 0.9*normal[last] {
		t.Errorf("last levels %v, normal %v", few[last], normal[last])
	}
	many, normal := Looks{200, 50}.tLevels(0.025), Looks{200, 50}.normalLevels(0.025)
	for k := range many {
		near(t, "many pairs", many[k]/normal[k], 1, 0.03)
	}
}

func TestLooks(t *testing.T) {
	for _, c := range []struct {
		looks Looks
		want  []int
	}{
		{Looks{40, 5}, []int{5, 10, 15, 20, 25, 30, 35, 40}},
		{Looks{12, 5}, []int{5, 10, 12}},
		{Looks{3, 1}, []int{2, 3}},
		{Looks{8, 8}, []int{8}},
		{Looks{8, 0}, []int{8}},
	} {
		if got := c.looks.At(); !slices.Equal(got, c.want) {
			t.Errorf("%+v: %v, want %v", c.looks, got, c.want)
		}
	}
	l := Looks{12, 5}
	if l.Next(0) != 5 || l.Next(5) != 10 || l.Next(11) != 12 || l.Next(12) != 12 {
		t.Errorf("next looks %d, %d, %d, %d", l.Next(0), l.Next(5), l.Next(11), l.Next(12))
	}
}

// TestLevelsRise: a larger alpha is more lenient at every look, which Holm's
// method over looks rests on.
func TestLevelsRise(t *testing.T) {
	for _, l := range []Looks{{40, 5}, {12, 5}, {30, 2}} {
		before := l.Levels(0.001)
		for _, alpha := range []float64{0.005, 0.0125, 0.025, 0.05, 0.2} {
			now := l.Levels(alpha)
			for k := range now {
				if !(now[k] >= before[k]) || k == len(now)-1 && !(now[k] > before[k]) {
					t.Errorf("%+v at %v, look %d: level %v after %v", l, alpha, k, now[k], before[k])
				}
			}
			before = now
		}
	}
}

// TestLeastIsTheTest: the p-value over looks is below alpha exactly when a look
// rejects at alpha.
func TestLeastIsTheTest(t *testing.T) {
	l, s := Looks{20, 5}, shares{}
	levels := l.Levels(0.025)
	for k := range levels {
		ps := []float64{0.9, 0.8, 0.7, 0.6}[:k+1]
		ps[k] = levels[k] * 1.002
		if p := s.least(l, ps); !(p > 0.025) || p > 0.0252 {
			t.Errorf("look %d just missed: %v", k, p)
		}
		ps[k] = levels[k] * 0.998
		if p := s.least(l, ps); !(p < 0.025) || p < 0.0248 {
			t.Errorf("look %d just reached: %v", k, p)
		}
	}
	if p := s.least(l, []float64{0.9}); p != 1 {
		t.Errorf("nothing seen: %v", p)
	}
}

// TestLooksKeepTheRate simulates plans that look after every 5 of at most 40
// pairs at a true difference on the margin: all looks together say "within" in no
// more than 2.5 % of plans; looking that often at 2.5 % each would in many more.
// Far from the margin few pairs are needed.
func TestLooksKeepTheRate(t *testing.T) {
	l := Looks{40, 5}
	levels := l.Levels(0.025)
	rng := rand.New(rand.NewPCG(validitySeed, 3))
	stops := func(at float64, law func(*rand.Rand) float64) (pairs int, naive bool) {
		xs := make([]float64, l.UpTo)
		for i := range xs {
			xs[i] = at + law(rng)
		}
		for k, n := range l.At() {
			p, _ := pValues(mean(xs[:n]), deviation(xs[:n]), n, 0)
			naive = naive || p < 0.025
			if pairs == 0 && p <= levels[k] {
				pairs = n
			}
		}
		return pairs, naive
	}
	plans := samples(t, false)
	for _, law := range laws[:3] {
		hits, naives := 0, 0
		for range plans {
			pairs, naive := stops(0, law.draw)
			hits, naives = hits+count(pairs > 0), naives+count(naive)
		}
		got, limit := float64(hits)/float64(plans), 0.025+slack(0.025, plans)
		t.Logf("%s: within in %.4f of %d plans, %.4f if every look were the only one", law.name, got, plans, float64(naives)/float64(plans))
		if got > limit || law.name == "normal" && (got < 0.025-slack(0.025, plans) || naives < 2*hits) {
			t.Errorf("%s: within in %.4f of plans, at most %.4f may be; %d without sharing", law.name, got, limit, naives)
		}
	}
	total, never := 0, 0
	for range 500 {
		pairs, _ := stops(1.2, laws[0].draw)
		total, never = total+pairs, never+count(pairs == 0)
	}
	if mean := float64(total) / 500; never > 0 || mean > 20 {
		t.Errorf("clearly within: decided after %.1f pairs on average, never in %d of 500 plans", mean, never)
	}
}

// TestDecideByLooks: a family with looks is decided early where the differences
// are plain, and not before the first look.
func TestDecideByLooks(t *testing.T) {
	q := question("a", 0.01)
	q.Planned, q.LookEvery = 40, 5
	base := runs("baseline", around(40, 0.9, 0.02)...)
	family := func(n int) []results.Comparison {
		good := runs("a", around(n, 0.93, 0.024)...)
		bad := runs("b", around(n, 0.80, 0.024)...)
		open := runs("c", around(n, 0.89, 0.06)...)
		return Decide([]results.Comparison{Pair(q, good, base), Pair(q, bad, base), Pair(q, open, base)})
	}
	kinds := func(cs []results.Comparison) (k []results.VerdictKind) {
		for _, c := range cs {
			k = append(k, c.Verdict.Kind)
		}
		return k
	}
	u := results.Undecided
	if got := kinds(family(4)); !slices.Equal(got, []results.VerdictKind{u, u, u}) {
		t.Errorf("before the first look: %v", got)
	}
	at20 := family(20)
	if got := kinds(at20); !slices.Equal(got, []results.VerdictKind{results.Within, results.Worse, u}) || Settled(at20) || !Settled(at20[:2]) {
		t.Errorf("after 20 pairs: %v", got)
	}
	if c := at20[2]; c.Verdict.Pairs != 40 {
		t.Errorf("undecided until %d pairs", c.Verdict.Pairs)
	}
	if w := strings.Join(at20[0].Warnings, "\n"); !strings.Contains(w, "look 4 of 8: looked at after 20 of at most 40 pairs") {
		t.Errorf("warnings %q", w)
	}
	// pairs between two looks change nothing
	if a, b := family(20), family(23); a[2].Holm != b[2].Holm || lookedAt(&b[2]) != 20 {
		t.Errorf("between looks: p %v, then %v", a[2].Holm, b[2].Holm)
	}
	same := Decide([]results.Comparison{Pair(q, runs("d", around(5, 0.9, 0.02)...), base)})
	if same[0].Verdict.Kind != u {
		t.Errorf("five equal differences decided early: %+v", same[0].Verdict)
	}
	if c := Decide([]results.Comparison{Pair(q, base, base)})[0]; c.Verdict.Kind != results.Within {
		t.Errorf("equal at the last look: %+v", c.Verdict)
	}
}

// TestSameRunsDecideAtOnce: an arm with the runs of the other, by their keys, is
// within from two pairs on; one with equal bits under other keys waits for the last
// look; one pair decides nothing.
func TestSameRunsDecideAtOnce(t *testing.T) {
	keyed := func(n int) []results.Run {
		rs := runs("baseline", around(n, 0.9, 0.02)...)
		for i := range rs {
			rs[i].Key = results.Hash{1, byte(i)}
		}
		return rs
	}
	for _, every := range []int{0, 5} {
		q := question("twin", 0.01)
		q.Planned, q.LookEvery = 40, every
		for n, want := range map[int]results.VerdictKind{1: results.Undecided, 2: results.Within, 7: results.Within} {
			c := Decide([]results.Comparison{Pair(q, keyed(n), keyed(n))})[0]
			if c.Verdict.Kind != want || !c.Same {
				t.Errorf("looks every %d, %d pairs: %+v", every, n, c.Verdict)
			}
			if w := strings.Join(c.Warnings, "\n"); n > 1 && (!strings.Contains(w, "the very same, in any replicate") || strings.Contains(w, "look ")) {
				t.Errorf("warnings %q", w)
			}
		}
		other := keyed(5)
		for i := range other {
			other[i].Key[0] = 2
		}
		if c := Decide([]results.Comparison{Pair(q, keyed(5), other)})[0]; c.Same || c.Verdict.Kind != results.Undecided {
			t.Errorf("equal bits, other keys: %+v", c.Verdict)
		}
	}
	// It takes its place in the family: the other arm's p-value is multiplied by one.
	q := question("twin", 0.01)
	q.Planned = 5
	arm := Pair(q, runs("a", around(5, 0.9, 0.03)...), runs("baseline", around(5, 0.9, 0.02)...))
	both := Decide([]results.Comparison{Pair(q, keyed(5), keyed(5)), arm})
	if both[0].Holm != 0 || both[1].Holm != arm.P {
		t.Errorf("p-values %v and %v, alone %v", both[0].Holm, both[1].Holm, arm.P)
	}
}
