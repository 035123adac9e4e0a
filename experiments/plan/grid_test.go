package plan

import (
	"fmt"
	"slices"
	"strings"
	"testing"
)

// gridPlan is basePlan with a grid behind its arm.
func gridPlan(lines ...string) string {
	return basePlan + "[[grid]]\n" + strings.Join(lines, "\n") + "\n"
}

// gridLine is the line of basePlan's grid table.
var gridLine = strings.Count(basePlan, "\n") + 1

// armSlugs are the arms of a plan behind the baseline and its spelt-out arm.
func armSlugs(p *Plan) []string {
	var all []string
	for i := range p.Arms[2:] {
		all = append(all, p.Arms[i+2].Slug)
	}
	return all
}

func TestGrid(t *testing.T) {
	p := load(t, gridPlan(`name = "{format}, {mode}"`, `title = "forward"`, `axis.format = ["E4M4", "bf16"]`,
		`axis.mode = ["nearest-even", "stochastic"]`, `forward.weight = { format = "{format}", rounding = "{mode}" }`))
	want := []string{"e4m4-nearest-even", "e4m4-stochastic", "bf16-nearest-even", "bf16-stochastic"}
	if got := armSlugs(p); !slices.Equal(got, want) {
		t.Fatalf("arms %q, want %q", got, want)
	}
	if p.Runs() != 6*4 {
		t.Errorf("%d runs", p.Runs())
	}
	if got := p.Arms[3].at(0, "forward.weight"); got != "E4M4, stochastic r=16 truncated, overflow infinity" {
		t.Errorf("forward.weight of %q: %s", p.Arms[3].Name, got)
	}
	g := p.Grids[0]
	if len(p.Grids) != 1 || g.Title != "forward" || fmt.Sprint(g.Axes) != "[{format [E4M4 bf16]} {mode [nearest-even stochastic]}]" || !slices.Equal(g.Arms, want) {
		t.Errorf("%+v", p.Grids)
	}
	if a := p.Arms[4]; a.Grid != "forward" || !slices.Equal(a.Axes, []Coordinate{{"format", "bf16"}, {"mode", "nearest-even"}}) {
		t.Errorf("%s: %q %v", a.Name, a.Grid, a.Axes)
	}
	if p.Arms[1].Grid != "" || p.Arms[1].Axes != nil {
		t.Error("an arm that is spelt out has a place in a grid")
	}
	text := ResolveText(p, ResolveOptions{})
	if want := "\ngrid \"forward\": 4 arms\n  format  E4M4, bf16\n  mode    nearest-even, stochastic\n"; !strings.Contains(text, want) {
		t.Errorf("resolved to %s", text)
	}
	// An arm of a grid is the arm that it would be spelt out.
	spelt := load(t, basePlan+"[[arm]]\nname = \"x\"\nforward.weight = { format = \"E4M4\", rounding = \"stochastic\" }\n")
	if spelt.Arms[2].Canonical != p.Arms[3].Canonical {
		t.Error("the canonical texts differ")
	}
}

// Each kind of value that a sweep is wanted over.
func TestGridValues(t *testing.T) {
	for _, c := range []struct {
		lines []string
		slugs string
		check func(a *Arm) string
		want  string // of the last arm
	}{
		{[]string{`name = "{s}"`, `axis.s = { splits = 9 }`, `storage = "{s}"`}, "e2m6 e3m5 e4m4 e5m3 e6m2 e7m1", weight, "E7M1, nearest-even, overflow infinity"},
		{[]string{`name = "{s}"`, `axis.s = { splits = [4, 5] }`, `storage = "{s}"`}, "e2m1 e3m0 e2m2 e3m1 e4m0", weight, "E4M0, nearest-even, overflow infinity"},
		{[]string{`name = "m{m}"`, `axis.m = { from = 2, to = 6, step = 2 }`, `storage = "E6M{m}"`}, "m2 m4 m6", weight, "E6M6, nearest-even, overflow infinity"},
		{[]string{`name = "r{r}"`, `axis.r = { from = 1, to = 16, times = 4 }`, `forward.weight = { format = "bf16", rounding = "stochastic", random_bits = "{r}" }`}, "r1 r4 r16", weight, "bfloat16, stochastic r=16 truncated, overflow infinity"},
		{[]string{`name = "chunk {k}"`, `axis.k = [2, 4]`, `accumulate = { format = "fp16", order = "chunk({k})" }`}, "chunk-2 chunk-4", func(a *Arm) string { return a.at(0, "forward.sum") }, "binary16, nearest-even, overflow infinity, chunk(4)"},
		{[]string{`name = "{p}"`, `axis.p = ["forward.weight", "update.master"]`, `"{p}" = "bf16"`}, "forward-weight update-master", func(a *Arm) string { return a.at(0, "update.master") }, bf16},
		{[]string{`name = "{p}"`, `axis.p = ["sum", "result"]`, `weight_gradient = { "{p}" = "bf16", product = "exact" }`}, "sum result", func(a *Arm) string { return a.at(0, "weight_gradient.result") }, bf16},
		{[]string{`name = "{p}"`, `axis.p = ["update.step", "update.master"]`, `update.state = "fp16"`, `"{p}" = "bf16"`}, "update-step update-master", func(a *Arm) string { return a.at(0, "update.state") }, fp16Point},
		{[]string{`name = "lr {lr}"`, `axis.lr = [0.01, 0.1]`, `learning_rate = "{lr}"`}, "lr-0-01 lr-0-1", func(a *Arm) string { return fmt.Sprint(a.Training.LearningRate.Start) }, "0.1"},
		{[]string{`name = "lr {lr}"`, `axis.lr = { from = 0.1, to = 0.3, step = 0.1 }`, `learning_rate = { start = "{lr}" }`}, "lr-0-1 lr-0-2 lr-0-3", func(a *Arm) string { return fmt.Sprint(a.Training.LearningRate.Start) }, "0.3"},
		{[]string{`name = "scale {s}"`, `axis.s = [1, 1024]`, `loss_scale = { kind = "fixed", value = "{s}" }`}, "scale-1 scale-1024", func(a *Arm) string { return a.LossScale }, "fixed 1024"},
		{[]string{`name = "m {m}"`, `axis.m = ["bf16", { name = "sr8", format = "bf16", rounding = "stochastic", random_bits = 8 }]`, `update.master = "{m}"`}, "m-bf16 m-sr8", func(a *Arm) string { return a.at(0, "update.master") }, "bfloat16, stochastic r=8 truncated, overflow infinity"},
		{[]string{`name = "{l} wide"`, `axis.l = ["first", 3]`, `storage = "bf16"`, "[[grid.layer]]", `select = "{l}"`, `everything = "fp16"`}, "first-wide 3-wide", func(a *Arm) string { return a.at(2, "forward.weight") }, fp16Point},
	} {
		p := load(t, gridPlan(c.lines...))
		if got := strings.Join(armSlugs(p), " "); got != c.slugs {
			t.Errorf("%q: arms %s, want %s", c.lines, got, c.slugs)
		}
		if got := c.check(&p.Arms[len(p.Arms)-1]); got != c.want {
			t.Errorf("%q: last arm has %s, want %s", c.lines, got, c.want)
		}
	}
}

func weight(a *Arm) string { return a.at(0, "forward.weight") }

// A contrast along an axis sets every value against one, at each place of the others.
func TestGridContrasts(t *testing.T) {
	lines := []string{
		`name = "{f} {r}"`, `axis.f = ["E4M4", "E5M3"]`, `axis.r = ["nearest-even", "stochastic", "up"]`,
		`storage = { format = "{f}", rounding = "{r}" }`, `contrast = { axis = "r", against = "nearest-even", margin = 0.5 }`,
	}
	p := load(t, gridPlan(lines...))
	want := "[{e4m4-stochastic e4m4-nearest-even 0.5} {e4m4-up e4m4-nearest-even 0.5} {e5m3-stochastic e5m3-nearest-even 0.5} {e5m3-up e5m3-nearest-even 0.5}]"
	if got := fmt.Sprint(p.Contrasts); got != want {
		t.Errorf("contrasts %s, want %s", got, want)
	}
	// One that the plan spells out keeps its margin.
	p = load(t, gridPlan(lines...)+"[[contrast]]\narm = \"E4M4 up\"\nagainst = \"E4M4 nearest-even\"\nmargin = 0.25\n")
	if len(p.Contrasts) != 4 || p.Contrasts[0] != (Contrast{"e4m4-up", "e4m4-nearest-even", 0.25}) {
		t.Errorf("contrasts %v", p.Contrasts)
	}
}

// A plan may have grids and no arm of its own; included grids come first.
func TestGridsAlone(t *testing.T) {
	head, _, _ := strings.Cut(basePlan, "[[arm]]")
	grid := "[[grid]]\nname = \"%s {f}\"\naxis.f = [\"bf16\", \"fp16\"]\nstorage = \"{f}\"\n"
	p, err := LoadFrom(texts{"plan.toml": "include = \"more.toml\"\n" + head + fmt.Sprintf(grid, "own"), "more.toml": fmt.Sprintf(grid, "included")}, "plan.toml")
	if err != nil {
		t.Fatal(err)
	}
	var slugs []string
	for _, a := range p.Arms {
		slugs = append(slugs, a.Slug)
	}
	if got := strings.Join(slugs, " "); got != "baseline included-bf16 included-fp16 own-bf16 own-fp16" {
		t.Errorf("arms %s", got)
	}
	if p.Grids[0].Title != "grid 1" || p.Grids[1].Title != "grid 2" {
		t.Errorf("%+v", p.Grids)
	}
}

func TestGridErrors(t *testing.T) {
	for _, c := range []struct {
		lines []string
		line  int // behind the grid's own
		want  string
	}{
		{[]string{`name = "x"`, `storage = "bf16"`}, 0, `grid[1]: the grid has no axis; write axis.split = ["E4M4", "E5M3"]`},
		{[]string{`name = "x"`, `axis = 3`}, 2, `grid[1].axis: wrong type: 3 is a whole number, want a table; `},
		{[]string{`name = "{f}"`, `axis.f = "bf16"`, `storage = "{f}"`}, 2, `grid[1].axis.f: wrong type: "bf16" is a text, want an array or a table; write ["E4M4", "E5M3"], { from = 1, to = 16 } or { splits = 9 }`},
		{[]string{`name = "{f}"`, `axis.f = []`, `storage = "{f}"`}, 2, "grid[1].axis.f: an axis of 0 values; write 1 to 1000 values"},
		{[]string{`name = "{f}"`, `axis.f = ["bf16", "fp16", "bf16"]`, `storage = "{f}"`}, 2, `grid[1].axis.f[3]: the axis has "bf16" twice; keep one of them`},
		{[]string{`name = "{f}"`, `axis.f = [{ format = "bf16" }]`, `storage = "{f}"`}, 2, "grid[1].axis.f[1]: a table without a name has no place in the name of an arm; "},
		{[]string{`name = "{r}"`, `axis.r = { from = 5, to = 2 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r.to: runs from 5 down to 2; write the smaller number first"},
		{[]string{`name = "{r}"`, `axis.r = { from = 0, to = 8, times = 2 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r.times: a factor of 2 from 0 on never arrives; "},
		{[]string{`name = "{r}"`, `axis.r = { from = 0, to = 8, step = 0 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r.step: a step of 0 never arrives; write step = 1"},
		{[]string{`name = "{r}"`, `axis.r = { from = 0, to = 1e9 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r: an axis of more than 1000 values; widen the step"},
		{[]string{`name = "{r}"`, `axis.r = { from = 0 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r: to is missing; write { from = 1, to = 16 }"},
		{[]string{`name = "{r}"`, `axis.r = { from = 0, to = 2, till = 3 }`, `storage = "E4M{r}"`}, 2, "grid[1].axis.r.till: unknown key; "},
		{[]string{`name = "{s}"`, `axis.s = { splits = 50 }`, `storage = "{s}"`}, 2, "grid[1].axis.s.splits: 50 is out of range; write 3 to 32"},
		{[]string{`name = "{s}"`, `axis.s = ["bf16"]`, `storage = "{t}"`}, 3, `grid[1].storage: no axis of the grid is called "t"; did you mean "s"?`},
		{[]string{`name = "{s}"`, `axis.s = ["bf16"]`, `storage = "fp16"`}, 2, `grid[1].axis.s: no setting uses the axis; write {s} where the value belongs`},
		{[]string{`name = "x"`, `axis.s = ["bf16", "fp16"]`, `storage = "{s}"`}, 1, `grid[1].name: the name does not tell the arms of axis s apart; write {s} into the name`},
		{[]string{`axis.s = ["bf16", "fp16"]`, `storage = "{s}"`}, 0, `grid[1]: a text for name is missing; write name = "{s}"`},
		{[]string{`name = "{s}"`, `axis.s = ["bf16", "fp16"]`, `storage = "{s}"`}, 1, `grid[1].name: the name "bf16" is taken by the arm in plan.toml line 23 (in the grid's arm "bf16"); `},
		{[]string{`name = "a {s}"`, `axis.s = ["E4M4", "e4m4"]`, `storage = "{s}"`}, 1, `grid[1].name: the name "a e4m4" and "a E4M4" in plan.toml line 26 are both "a-e4m4" as names of runs (in the grid's arm "a e4m4"); `},
		{[]string{`name = "a {s}"`, `axis.s = ["bf16", "fp61", "fp23"]`, `storage = "{s}"`}, 3, `grid[1].storage: unknown format "fp61" (in the grid's arm "a fp61"); did you mean "fp16"?`},
		{[]string{`name = "a {r}"`, `axis.r = ["stochastic", "up"]`, `storage = { format = "bf16", rounding = "{r}", random_bits = 3 }`}, 3, `grid[1].storage.random_bits: random_bits without stochastic rounding (in the grid's arm "a up"); `},
		{[]string{`name = "a {s}"`, `axis.s = ["bf16"]`, `storge = "{s}"`}, 3, `grid[1].storge: unknown key (in the grid's arm "a bf16"); did you mean "storage"?`},
		{[]string{`name = "a {p}"`, `axis.p = ["update.step", "update.state"]`, `"{p}" = "bf16"`, `update.step = "fp16"`}, 4, `grid[1].update.step: sets step, which line 28 sets too; keep one of them`},
		{[]string{`name = "{a} {b}"`, `axis.a = { from = 1, to = 100 }`, `axis.b = { from = 1, to = 100 }`, `storage = "E{a}M{b}"`}, 0, "grid[1]: with this grid of 100 x 100 arms the plan has more than 1000 arms; shorten the axes or make several plans of it"},
		{[]string{`name = "a {s}"`, `axis.s = ["bf16"]`, `storage = "{s}"`, `contrast = { axis = "t", against = "bf16" }`}, 4, `grid[1].contrast.axis: unknown word "t"; did you mean "s"?`},
		{[]string{`name = "a {s}"`, `axis.s = ["bf16"]`, `storage = "{s}"`, `contrast = { axis = "s", against = "fp16" }`}, 4, `grid[1].contrast.against: the axis s has no such value; write one of bf16`},
		{[]string{`name = "a {s}"`, `axis.s = ["bf16"]`, `storage = "{s}"`, `contrast = { axis = "s" }`}, 4, `grid[1].contrast: against is missing; `},
	} {
		all := failures(t, texts{"plan.toml": gridPlan(c.lines...)}, "plan.toml")
		want := fmt.Sprintf("plan.toml:%d: %s", gridLine+c.line, c.want)
		if len(all) != 1 || !strings.HasPrefix(all[0].Error(), want) {
			t.Errorf("%q\ngot  %v\nwant %s", c.lines, all, want)
		}
	}
}

// Titles tell grids apart in the report.
func TestGridTitlesDiffer(t *testing.T) {
	one := "[[grid]]\ntitle = \"same\"\nname = \"%d {s}\"\naxis.s = [\"bf16\"]\nstorage = \"{s}\"\n"
	all := failures(t, texts{"plan.toml": basePlan + fmt.Sprintf(one, 1) + fmt.Sprintf(one, 2)}, "plan.toml")
	if len(all) != 1 || !strings.Contains(all[0].Error(), `the title "same" is taken by the grid in plan.toml line 25`) {
		t.Errorf("%v", all)
	}
}
