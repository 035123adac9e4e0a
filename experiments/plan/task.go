package plan

import (
	"errors"
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"strings"

	"ulpine/datasets"
	"ulpine/trainer"
)

// Task is the data of a plan.
type Task struct {
	Data   string // "pump-vibration"
	Source datasets.Source
	datasets.Facts
	Canonical string // what determines the examples, paths left out
}

// Sizes are the numbers of examples as the trainer wants them.
func (t *Task) Sizes() trainer.Sizes {
	return trainer.Sizes{Train: t.Train, Validation: t.Validation, Test: t.Test}
}

// outputs is how many outputs of a network the task asks for: one a class, or one
// a target of a regression.
func (t *Task) outputs() int { return len(t.ClassNames) + len(t.TargetNames) }

// readTask reads [task].
func (r *reader) readTask(root *node) Task {
	n := r.required(root, "task", `[task] with data = "pump-vibration"`)
	if n == nil {
		return Task{}
	}
	at := n.table["data"]
	if at == nil {
		for _, k := range n.names() { // which other keys there are, the data set would say
			if _, near := nearest(k, []string{"data"}); near {
				r.fail(n.table[k].errorf(suggest(k, []string{"data"}), "unknown key"))
				return Task{}
			}
		}
		r.fail(n.lacks("data", fmt.Sprintf("write data = %q", datasets.Names()[0]), "data is missing"))
		return Task{}
	}
	return r.makeTask(n, r.word(n, "data", "", datasets.Names()...), n.table)
}

// varyTask is the plan's task with what the table task of [pretrain] changes.
// Another data set starts from that one's defaults.
func (r *reader) varyTask(root, pretrain *node, main *Task) Task {
	n := r.table(pretrain, "task", `task.variant = "plain"`)
	if n == nil || root.table["task"] == nil {
		return *main
	}
	name := r.word(n, "data", main.Data, datasets.Names()...)
	keys := n.table
	if name == main.Data {
		keys = maps.Clone(root.table["task"].table)
		maps.Copy(keys, n.table)
	}
	return r.makeTask(n, name, keys)
}

// makeTask makes the source called name of the keys; n is the table that errors
// without a key of their own are told at. A relative path of a file starts at
// the folder of the file that names the data set.
func (r *reader) makeTask(n *node, name string, keys map[string]*node) Task {
	if name == "" {
		return Task{}
	}
	before := len(r.errs)
	o := datasets.Options{Values: map[string]any{}, Folder: folder(n, keys)}
	for k, sub := range keys {
		if sub.table != nil {
			r.wrongType(sub, "a single value or an array", k+" = ...")
		} else if k != "data" {
			o.Values[k] = sub.plain()
		}
	}
	if len(r.errs) > before {
		return Task{}
	}
	source, err := datasets.New(name, o)
	if err != nil {
		r.failTask(n, name, keys, err)
		return Task{}
	}
	facts, err := source.Facts()
	if err != nil {
		r.failTask(n, name, keys, err)
		return Task{}
	}
	return Task{Data: name, Source: source, Facts: facts, Canonical: source.Canonical()}
}

// folder is where relative paths of files start.
func folder(n *node, keys map[string]*node) string {
	file := n.file
	if at := keys["data"]; at != nil {
		file = at.file
	}
	return filepath.Dir(filepath.FromSlash(file))
}

// plain is a node's value as the decoder gave it, places stripped.
func (n *node) plain() any {
	if n.list == nil {
		return n.value
	}
	all := make([]any, len(n.list))
	for i, e := range n.list {
		all[i] = e.plain()
	}
	return all
}

// failTask records the errors of a data set, each at the key it names.
func (r *reader) failTask(n *node, name string, keys map[string]*node, err error) {
	if joined, ok := err.(interface{ Unwrap() []error }); ok {
		for _, one := range joined.Unwrap() {
			r.failTask(n, name, keys, one)
		}
		return
	}
	var option *datasets.OptionError
	var file *datasets.FileError
	e := fault(n, err)
	switch {
	case errors.As(err, &option):
		e = optionFault(n, name, keys, option)
	case errors.As(err, &file):
		e = fileFault(n, keys, file)
	case e.Remedy == "":
		e.Remedy = "check the files that the task names"
	}
	e.Err = err
	r.fail(e)
}

// optionFault tells what is wrong with a key of a task.
func optionFault(n *node, name string, keys map[string]*node, option *datasets.OptionError) *PlanError {
	at := keys[option.Key]
	known, _ := datasets.Keys(name)
	switch {
	case at == nil:
		return n.errorf(option.Remedy, "%s %s", option.Key, option.Reason)
	case !slices.Contains(known, option.Key):
		return at.errorf(suggest(option.Key, append(known, "data")), "unknown key")
	}
	return at.errorf(option.Remedy, "%s", option.Reason)
}

// fileFault tells what is wrong with a file at the key that names it.
func fileFault(n *node, keys map[string]*node, file *datasets.FileError) *PlanError {
	at := n
	for _, key := range keys { // two keys with the same file would be the same fault
		for _, k := range append([]*node{key}, key.list...) {
			name, ok := k.value.(string)
			if ok && (name == file.File || filepath.Join(folder(n, keys), name) == file.File) && (at == n || k.line < at.line) {
				at = k
			}
		}
	}
	return at.errorf(file.Remedy, "%s", strings.TrimSuffix(file.Error(), "; "+file.Remedy))
}

// checkSameShape holds the data of a pretraining to the network of the plan.
func (r *reader) checkSameShape(n *node, main, pre *Task) {
	if main.Source == nil || pre.Source == nil {
		return
	}
	if at := n.table["task"]; at != nil {
		n = at
	}
	if !slices.Equal(main.Shape, pre.Shape) || len(main.ClassNames) != len(pre.ClassNames) || len(main.TargetNames) != len(pre.TargetNames) {
		r.fail(n.errorf("pretrain on data of the same shape and classes",
			"examples of %s in %d classes do not fit the network, which takes %s in %d classes",
			shapeText(pre.Shape), len(pre.ClassNames), shapeText(main.Shape), len(main.ClassNames)))
	}
	if pre.Train == 0 {
		r.fail(n.errorf("give the pretraining training examples", "no training examples"))
	}
}
