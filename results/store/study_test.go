package store

import (
	"errors"
	"strings"
	"testing"
	"time"

	"ulpine/results"
)

var (
	claim  = results.Claim{Metric: "test accuracy", Margin: 0.01, Confidence: 0.95, Count: 2, FirstSeed: 100}
	first  = Study{ID: results.Hash{1}, Title: "first look", PlanFile: "first.toml"}
	second = Study{ID: results.Hash{2}, Title: "second look", PlanFile: "second.toml"}
)

// planOf names runs 0..5 (arms 0, 1, 2 of replicates 100 and 101); arm 0 is the baseline.
func planOf(names ...string) (planned []Planned) {
	for n := range 6 {
		planned = append(planned, Planned{
			Arm: names[n%3], Replicate: 100 + uint64(n/3), Key: keyOf(n), Place: n % 3, Compared: n%3 > 0,
		})
	}
	return planned
}

func TestClaimIsFixedOnce(t *testing.T) {
	s := open(t)
	if _, _, err := s.Claim(first.ID, claim); !errors.Is(err, ErrNoStudy) {
		t.Errorf("before the first run: %v", err)
	}
	start := time.Now()
	fixed, err := s.Fix(first, claim, planOf("baseline", "a", "b"))
	if err != nil || fixed.Claim.Margin != 0.01 || fixed.Fixed.Before(start.Add(-time.Second)) || fixed.Hash.IsZero() || fixed.RunsBefore != 0 {
		t.Fatalf("%+v, %v", fixed, err)
	}
	wider := claim
	wider.Margin = 0.02
	again, err := s.Fix(first, wider, planOf("baseline", "a", "b"))
	if err != nil || again.Claim.Margin != 0.01 || !again.Fixed.Equal(fixed.Fixed) || again.Hash != fixed.Hash {
		t.Errorf("a second Fix changed the claim: %+v, %v", again, err)
	}
	s.Close()
	reader := openAt(t, s.Path(), Options{ReadOnly: true})
	got, differs, err := reader.Claim(first.ID, wider)
	if err != nil || got.Claim.Margin != 0.01 || got.Hash != fixed.Hash || differs != "margin was 0.01, is 0.02" {
		t.Errorf("%+v, %q, %v", got, differs, err)
	}
	if _, differs, _ = reader.Claim(first.ID, claim); differs != "" {
		t.Errorf("the same claim differs: %s", differs)
	}
}

func TestClaimHashSeesEverything(t *testing.T) {
	s := open(t)
	seen := map[results.Hash]string{}
	changes := map[string]func(*results.Claim){
		"as it is":    func(*results.Claim) {},
		"metric":      func(c *results.Claim) { c.Metric = "test loss" },
		"margin":      func(c *results.Claim) { c.Margin = 0.02 },
		"confidence":  func(c *results.Claim) { c.Confidence = 0.9 },
		"count":       func(c *results.Claim) { c.Count = 3 },
		"looks":       func(c *results.Claim) { c.LookEvery = 5 },
		"other looks": func(c *results.Claim) { c.LookEvery = 10 },
		"seed":        func(c *results.Claim) { c.FirstSeed = 1 },
		"contrast":    func(c *results.Claim) { c.Contrasts = []results.ContrastClaim{{Arm: "a", Against: "b", Margin: 1}} },
	}
	id := byte(10)
	for name, change := range changes {
		c := claim
		change(&c)
		id++
		fixed, err := s.Fix(Study{ID: results.Hash{id}}, c, nil)
		if err != nil {
			t.Fatal(err)
		}
		if other, double := seen[fixed.Hash]; double {
			t.Errorf("%s and %s have one hash", name, other)
		}
		seen[fixed.Hash] = name
	}
}

// TestClaimAfterTheRuns: a second plan over the same runs learns that they were
// there before, and which claim they were made under.
func TestClaimAfterTheRuns(t *testing.T) {
	s := open(t)
	if _, err := s.Fix(first, claim, planOf("baseline", "a", "b")); err != nil {
		t.Fatal(err)
	}
	put(t, s, run(0, false), run(1, false), run(2, false), run(4, false))
	wider := claim
	wider.Margin = 0.05
	fixed, err := s.Fix(second, wider, planOf("baseline", "c", "d"))
	if err != nil {
		t.Fatal(err)
	}
	if fixed.RunsBefore != 3 { // run 0 is the baseline's
		t.Errorf("%d runs before, want 3", fixed.RunsBefore)
	}
	if len(fixed.Earlier) != 1 || !strings.Contains(fixed.Earlier[0], `"first look", fixed `) ||
		!strings.Contains(fixed.Earlier[0], "margin was 0.01, is 0.05") {
		t.Errorf("earlier claims: %q", fixed.Earlier)
	}
	third := Study{ID: results.Hash{3}, Title: "same claim"}
	fixed, err = s.Fix(third, claim, planOf("baseline", "c", "d")[:3])
	if err != nil || fixed.RunsBefore != 2 || len(fixed.Earlier) != 1 || !strings.Contains(fixed.Earlier[0], "second look") {
		t.Errorf("%+v, %v", fixed, err)
	}
}

func names(list []Entry) string {
	var words []string
	for _, e := range list {
		words = append(words, e.Name()+" "+string(e.State))
	}
	return strings.Join(words, "; ")
}

func TestList(t *testing.T) {
	s := open(t)
	if _, err := s.Fix(first, claim, planOf("baseline", "z", "b")); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Fix(second, claim, planOf("baseline", "a", "twin")[:3]); err != nil {
		t.Fatal(err)
	}
	put(t, s, run(0, false), run(1, false), run(3, false),
		&results.Run{Arm: "b", Replicate: 101, Key: keyOf(5), State: results.Failed, Cause: "no memory"})
	stray := run(8, false)
	stray.Arm = "stray"
	put(t, s, stray)
	if err := s.Begin("z", 101, keyOf(4)); err != nil {
		t.Fatal(err)
	}
	if err := s.BreakOff(); err != nil { // waits for the writer
		t.Fatal(err)
	}
	r101 := uint64(101)
	for want, f := range map[string]Filter{
		"baseline/100 stored; baseline/101 stored; z/100 stored; z/101 in flight; b/101 failed; " +
			"baseline/100 stored; a/100 stored; stray/102 stored": {},
		"baseline/100 stored; a/100 stored":                  {Study: second.ID},
		"z/100 stored; z/101 in flight":                      {Arm: "z"},
		"baseline/101 stored; z/101 in flight; b/101 failed": {Study: first.ID, Replicate: &r101},
		"b/101 failed": {State: results.Failed},
		"":             {Arm: "nobody"},
	} {
		list, err := s.List(f)
		if err != nil || names(list) != want {
			t.Errorf("%+v\ngot  %s\nwant %s, %v", f, names(list), want, err)
		}
	}
	list, _ := s.List(Filter{State: results.Failed})
	if list[0].Cause != "no memory" || list[0].Title != "first look" || list[0].Study != first.ID {
		t.Errorf("%+v", list[0])
	}
}

func TestFind(t *testing.T) {
	s := open(t)
	s.Fix(first, claim, planOf("baseline", "a", "b"))
	other := planOf("baseline", "b", "c")[:3] // here b is another run
	if _, err := s.Fix(second, claim, other); err != nil {
		t.Fatal(err)
	}
	put(t, s, run(0, false), run(1, false), run(2, false))

	if e, err := s.Find("baseline/100", results.Hash{}); err != nil || e.Key != keyOf(0) {
		t.Errorf("one run under two studies: %v, %v", e.Key, err)
	}
	if _, err := s.Find("b/100", results.Hash{}); !errors.Is(err, ErrAmbiguous) ||
		!strings.Contains(err.Error(), "first look") || !strings.Contains(err.Error(), "second look") {
		t.Errorf("two runs of one name: %v", err)
	}
	if e, err := s.Find("b/100", second.ID); err != nil || e.Key != keyOf(1) || e.Arm != "b" {
		t.Errorf("narrowed by study: %+v, %v", e, err)
	}
	if e, err := s.Find(keyOf(2).String()[:64], results.Hash{}); err != nil || e.Key != keyOf(2) || e.Arm != "arm-2" {
		t.Errorf("by key: %+v, %v", e, err)
	}
	for name, want := range map[string]error{
		"a/101":                     ErrNoRun,
		"nobody/100":                ErrNoRun,
		strings.Repeat("0", 10):     ErrNoRun,
		keyOf(2).String()[:8]:       ErrAmbiguous, // all invented keys begin alike
		strings.ToUpper("abcdef12"): ErrNoRun,
	} {
		if _, err := s.Find(name, results.Hash{}); !errors.Is(err, want) {
			t.Errorf("%s: %v, want %v", name, err, want)
		}
	}
	_, err := s.Find("a/101", first.ID)
	if err == nil || !strings.Contains(err.Error(), "replicates 100") {
		t.Errorf("no hint at what is there: %v", err)
	}
	if _, err := s.Find("nonsense", results.Hash{}); err == nil {
		t.Error("a word without a slash was found")
	}
}

func TestFindStudy(t *testing.T) {
	s := open(t)
	if _, err := s.FindStudy("first look"); !errors.Is(err, ErrNoStudy) {
		t.Errorf("an empty store: %v", err)
	}
	s.Fix(first, claim, nil)
	s.Fix(second, claim, nil)
	for word, want := range map[string]results.Hash{
		"first look": first.ID, "second.toml": second.ID, "0200": second.ID, first.ID.Short(): first.ID,
	} {
		if got, err := s.FindStudy(word); err != nil || got.ID != want {
			t.Errorf("%s: %v, %v", word, got.Title, err)
		}
	}
	for _, word := range []string{"", "01", "third", "ffff"} {
		if _, err := s.FindStudy(word); !errors.Is(err, ErrNoStudy) {
			t.Errorf("%q: %v", word, err)
		}
	}
	s.Fix(Study{ID: results.Hash{9}, Title: "first look"}, claim, nil)
	if _, err := s.FindStudy("first look"); !errors.Is(err, ErrAmbiguous) {
		t.Errorf("two of one title: %v", err)
	}
}

func TestAddRuns(t *testing.T) {
	s := open(t)
	if _, err := s.Fix(first, claim, nil); err != nil {
		t.Fatal(err)
	}
	data := map[results.Hash]results.Hash{{1}: {11}, {2}: {12}}
	plan := planOf("baseline", "a", "b")
	if err := s.AddRuns(first.ID, plan[:2], data); err != nil {
		t.Fatal(err)
	}
	if err := s.AddRuns(first.ID, plan[2:], map[results.Hash]results.Hash{{2}: {22}}); err != nil {
		t.Fatal(err)
	}
	put(t, s, run(1, false), run(5, false))
	list, err := s.List(Filter{Study: first.ID})
	if err != nil || names(list) != "a/100 stored; b/101 stored" {
		t.Errorf("%s, %v", names(list), err)
	}
	noted, err := s.Data([]results.Hash{{1}, {2}, {3}})
	if err != nil || len(noted) != 2 || noted[results.Hash{1}] != (results.Hash{11}) || noted[results.Hash{2}] != (results.Hash{22}) {
		t.Errorf("noted %v, %v", noted, err)
	}
}
