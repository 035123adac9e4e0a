package plan

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
)

// PlanError is one thing wrong with a plan, told in one line: where, what, and
// what to do about it.
type PlanError struct {
	File   string // as the caller named it, or as an include resolved it
	Line   int    // 1-based; 0 when the whole file is meant
	Key    string // dotted; elements of arrays are counted from 1: "arm[2].update.master"
	Reason string // lower case, no full stop
	Remedy string // lower case, an instruction; may be empty only when Reason holds it
	Err    error  // the cause, if another package found it

	absent string // dotted: the required key whose absence this tells; empty: something else
	meant  string // dotted: the key that an unknown one was probably meant to be
}

// lacks makes the error for a required key that the table n does not have.
func (n *node) lacks(key, remedy, reason string) *PlanError {
	e := n.errorf(remedy, "%s", reason)
	e.absent = joinKey(n.key, key)
	return e
}

// withoutEchoes leaves out that a key is missing where it is there, but misspelt.
func (e Errors) withoutEchoes() Errors {
	meant := map[string]bool{}
	for _, one := range e {
		meant[one.meant] = true
	}
	return slices.DeleteFunc(e, func(one *PlanError) bool { return one.absent != "" && meant[one.absent] })
}

// Error is "file:line: key: reason; remedy", always one line.
func (e *PlanError) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d", e.Line)
	}
	b.WriteString(": ")
	if e.Key != "" {
		b.WriteString(shorten(e.Key))
		b.WriteString(": ")
	}
	b.WriteString(shorten(e.Reason))
	if e.Remedy != "" {
		b.WriteString("; ")
		b.WriteString(e.Remedy)
	}
	return oneLine(b.String())
}

// Unwrap returns the cause.
func (e *PlanError) Unwrap() error { return e.Err }

// Errors are all the things wrong with a plan, in the order of files and lines
// in which they were found. It is never empty when returned as an error.
type Errors []*PlanError

// Error has one line for each thing wrong.
func (e Errors) Error() string {
	lines := make([]string, len(e))
	for i, one := range e {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

// Unwrap lets errors.As find each *PlanError.
func (e Errors) Unwrap() []error {
	all := make([]error, len(e))
	for i, one := range e {
		all[i] = one
	}
	return all
}

// shorten cuts what a plan's author wrote at a length that still fits a line.
func shorten(s string) string {
	const most = 300
	if len(s) <= most {
		return s
	}
	return strings.ToValidUTF8(s[:most], "") + "..."
}

// inOrder sorts errors by line, files in the order in which they were met.
func (e Errors) inOrder() Errors {
	met := map[string]int{}
	for _, one := range e {
		if _, known := met[one.File]; !known {
			met[one.File] = len(met)
		}
	}
	slices.SortStableFunc(e, func(a, b *PlanError) int {
		return cmp.Or(met[a.File]-met[b.File], a.Line-b.Line)
	})
	return e
}

// oneLine replaces control characters, which a plan may smuggle into a message
// through a quoted key or value, so that one error stays one line.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || r == '\u0085' || r == '\u2028' || r == '\u2029' {
			return ' '
		}
		return r
	}, s)
}
