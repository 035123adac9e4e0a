package plan

import (
	"cmp"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/BurntSushi/toml"
)

// node is a value of a plan with the place it was written at. Exactly one of
// table, list and value is in use.
type node struct {
	file   string
	line   int
	key    string           // for people: "arm[2].update.master"
	inline bool             // a table written { ... }: a value, replaced whole
	table  map[string]*node // not nil: a table
	list   []*node          // not nil: an array
	value  any              // string, int64, float64, bool or a date
}

// maxText bounds a plan file. A plan is some kilobytes; anything of this size
// is another file given by mistake.
const maxText = 256 << 10

// parse turns TOML text into a tree of nodes.
func parse(file, text string) (*node, error) {
	if len(text) > maxText {
		return nil, &PlanError{
			File: file, Reason: fmt.Sprintf("the file has %d bytes, more than the %d a plan may have", len(text), maxText),
			Remedy: "name a plan, not a data file",
		}
	}
	if at, ok := invalidText(text); !ok {
		return nil, &PlanError{
			File: file, Line: 1 + strings.Count(text[:at], "\n"),
			Reason: "the text is not UTF-8", Remedy: "save the plan as UTF-8",
		}
	}
	places, deep := scan(text)
	if deep > 0 {
		return nil, &PlanError{
			File: file, Line: deep, Reason: fmt.Sprintf("tables or arrays nested more than %d deep", maxNesting),
			Remedy: "a plan needs no more than five levels",
		}
	}
	tree, err := decode(text)
	if err != nil {
		return nil, syntaxError(file, err)
	}
	b := builder{file, places}
	return b.build("", "", 1, tree), nil
}

// invalidText returns the first byte that is not UTF-8, or a NUL.
func invalidText(text string) (at int, ok bool) {
	for i := 0; i < len(text); {
		r, n := utf8.DecodeRuneInString(text[i:])
		if r == 0 || r == utf8.RuneError && n == 1 {
			return i, false
		}
		i += n
	}
	return 0, true
}

// decode calls the TOML decoder. It is other people's code fed with a user's
// text: should it ever panic, that too is told as an error.
func decode(text string) (tree map[string]any, err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("the TOML decoder failed: %v", r)
		}
	}()
	_, err = toml.Decode(text, &tree)
	return tree, err
}

// syntaxError tells a decoder's error in one line.
func syntaxError(file string, err error) *PlanError {
	e := &PlanError{File: file, Reason: "not valid TOML: " + err.Error(), Remedy: "correct the line", Err: err}
	var p toml.ParseError
	if errors.As(err, &p) {
		e.Line, e.Key = p.Position.Line, p.LastKey
		message, _, _ := strings.Cut(p.Message, "\n")
		e.Reason = "not valid TOML: " + strings.TrimRight(message, ".")
	}
	return e
}

// builder joins decoded values and scanned places.
type builder struct {
	file   string
	places map[path]place
}

// build makes the node of v. A value without a scanned place inherits its
// parent's line.
func (b *builder) build(p path, key string, line int, v any) *node {
	at, known := b.places[p]
	if !known {
		at.line = line
	}
	n := &node{file: b.file, line: at.line, key: key, inline: at.inline}
	switch v := v.(type) {
	case map[string]any:
		n.table = make(map[string]*node, len(v))
		for k, sub := range v {
			n.table[k] = b.build(p.key(k), joinKey(key, k), n.line, sub)
		}
	case []map[string]any:
		n.list = make([]*node, len(v))
		for i, sub := range v {
			n.list[i] = b.build(p.index(i), elementKey(key, i), n.line, sub)
		}
	case []any:
		n.list = make([]*node, len(v))
		for i, sub := range v {
			n.list[i] = b.build(p.index(i), elementKey(key, i), n.line, sub)
		}
	default:
		n.value = v
	}
	return n
}

// joinKey appends a name to a dotted key, quoted where TOML would need quotes.
func joinKey(key, name string) string {
	bare := name != "" && strings.Trim(name, "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_-") == ""
	if !bare {
		name = strconv.Quote(name)
	}
	if key == "" {
		return name
	}
	return key + "." + name
}

// elementKey counts from 1, as people do.
func elementKey(key string, i int) string { return key + "[" + strconv.Itoa(i+1) + "]" }

// names are the keys of a table in the order in which they are written.
func (n *node) names() []string {
	return slices.SortedFunc(maps.Keys(n.table), func(a, b string) int {
		x, y := n.table[a], n.table[b]
		return cmp.Or(cmp.Compare(x.file, y.file), cmp.Compare(x.line, y.line), cmp.Compare(a, b))
	})
}

// kind is the type of a value in words, for messages.
func (n *node) kind() string {
	switch {
	case n.table != nil:
		return "a table"
	case n.list != nil:
		return "an array"
	}
	switch n.value.(type) {
	case string:
		return "a text"
	case int64:
		return "a whole number"
	case float64:
		return "a number with a fraction"
	case bool:
		return "true or false"
	}
	return "a date"
}

// errorf makes an error at the node.
func (n *node) errorf(remedy, reason string, args ...any) *PlanError {
	return &PlanError{File: n.file, Line: n.line, Key: n.key, Reason: fmt.Sprintf(reason, args...), Remedy: remedy}
}
