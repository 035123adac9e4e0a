package plan

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"ulpine/experiments/plans"
)

// Source yields the text of a plan or fragment by its slash-separated path as
// the user or an include wrote it.
type Source interface {
	ReadPlan(name string) ([]byte, error)
}

// disk reads files, and falls back to the plans that ship inside the program,
// so that they run from any directory.
type disk struct{ notices *[]string }

// shippedAt is where the embedded plans stand in the project's tree.
const shippedAt = "experiments/plans"

// ReadPlan reads the file name, or the embedded plan of that name, as
// experiments/plans/first-look.toml or first-look.toml.
func (d disk) ReadPlan(name string) ([]byte, error) {
	text, err := os.ReadFile(filepath.FromSlash(name))
	if !errors.Is(err, fs.ErrNotExist) {
		return text, err
	}
	clean := filepath.ToSlash(filepath.Clean(name))
	inside, ok := strings.CutPrefix(clean, shippedAt+"/")
	if !ok && strings.Contains(clean, "/") {
		return nil, err // a bare name may be that of a shipped plan, a path elsewhere is not
	}
	shipped, missing := plans.Files.ReadFile(inside)
	if missing != nil {
		return nil, err
	}
	*d.notices = append(*d.notices, fmt.Sprintf("%s is not on disk: using the copy that ships inside ulpine", name))
	return shipped, nil
}

// loader reads a plan and everything it includes.
type loader struct {
	source Source
	text   strings.Builder // everything read, in reading order
}

// maxIncludes bounds the depth of includes.
const maxIncludes = 8

// load returns the merged tree of the file name. open are the files being read
// around it, outermost first; by is the include that asked for it, or nil.
func (l *loader) load(name string, open []string, by *node) (*node, error) {
	if err := checkCycle(name, open, by); err != nil {
		return nil, err
	}
	raw, err := l.source.ReadPlan(name)
	if err != nil {
		return nil, cannotRead(name, by, err)
	}
	l.keep(name, string(raw), by != nil)
	root, err := parse(name, string(raw))
	if err != nil {
		return nil, err
	}
	include := root.table["include"]
	if include == nil {
		return root, nil
	}
	delete(root.table, "include")
	fragments, err := includes(include)
	if err != nil {
		return nil, err
	}
	var merged *node
	for _, f := range fragments {
		fragment, err := l.load(besides(name, f.value.(string)), append(slices.Clone(open), name), f)
		if err != nil {
			return nil, err
		}
		merged = merge(merged, fragment)
	}
	return merge(merged, root), nil
}

// checkCycle refuses a file that is being read already.
func checkCycle(name string, open []string, by *node) error {
	if slices.Contains(open, name) {
		return by.errorf("remove one of these includes", "a cycle of includes: %s", strings.Join(append(slices.Clone(open), name), " -> "))
	}
	if len(open) > maxIncludes {
		return by.errorf("include the fragment directly", "includes nest deeper than %d", maxIncludes)
	}
	return nil
}

// cannotRead is the error for a file that cannot be read.
func cannotRead(name string, by *node, err error) error {
	reason := err
	var p *fs.PathError
	if errors.As(err, &p) {
		reason = p.Err
	}
	if by == nil {
		return &PlanError{File: name, Reason: "cannot read the plan: " + reason.Error(), Remedy: "check the path", Err: err}
	}
	e := by.errorf("check the path, which is relative to the file that includes it", "cannot read %s: %v", name, reason)
	e.Err = err
	return e
}

// keep adds a file to the text of the plan as written.
func (l *loader) keep(name, text string, fragment bool) {
	if fragment {
		fmt.Fprintf(&l.text, "\n# ---- included: %s ----\n", filepath.Base(name))
	}
	l.text.WriteString(text)
	if !strings.HasSuffix(text, "\n") {
		l.text.WriteByte('\n')
	}
}

// includes returns the names in an include, one text or an array of texts.
func includes(n *node) ([]*node, error) {
	all := n.list
	if all == nil {
		all = []*node{n}
	}
	for _, f := range all {
		if name, ok := f.value.(string); !ok || name == "" {
			return nil, f.errorf(`write include = "fragment.toml"`, "must name a file, not %s", f.kind())
		}
	}
	return all, nil
}

// besides resolves a path that is written in the file name.
func besides(name, relative string) string {
	if filepath.IsAbs(relative) {
		return filepath.Clean(relative)
	}
	return filepath.ToSlash(filepath.Join(filepath.Dir(filepath.FromSlash(name)), filepath.FromSlash(relative)))
}

// merge lays own over base. Tables merge key by key; texts, numbers, arrays and
// inline tables are values and replace what they meet. Arrays of named tables
// ([[arm]]) are joined: base's first, an own one of the same name in its place.
func merge(base, own *node) *node {
	switch {
	case base == nil:
		return own
	case base.table != nil && own.table != nil && !base.inline && !own.inline:
		merged := *own
		merged.table = make(map[string]*node, len(base.table)+len(own.table))
		for k, n := range base.table {
			merged.table[k] = n
		}
		for k, n := range own.table {
			merged.table[k] = merge(base.table[k], n)
		}
		return &merged
	case allTables(base) && allTables(own):
		merged := *own
		merged.list = slices.Clone(base.list)
		for _, n := range own.list {
			merged.list = joinNamed(merged.list, len(base.list), n)
		}
		return &merged
	}
	return own
}

// joinNamed puts n in the place of the one of the first count tables that has
// its name, else at the end.
func joinNamed(list []*node, count int, n *node) []*node {
	if name := n.table["name"]; name != nil && name.value != nil {
		for i, other := range list[:count] {
			if o := other.table["name"]; o != nil && o.value == name.value {
				list[i] = n
				return list
			}
		}
	}
	return append(list, n)
}

// allTables reports whether n is a non-empty array of tables.
func allTables(n *node) bool {
	for _, e := range n.list {
		if e.table == nil {
			return false
		}
	}
	return len(n.list) > 0
}
