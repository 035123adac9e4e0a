package datasets

import (
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"sort"
	"strconv"
	"strings"
)

// OptionError says what is wrong with one key of a task. The caller adds file
// and line.
type OptionError struct {
	Key, Reason, Remedy string
}

// Error names key, reason and remedy.
func (e *OptionError) Error() string {
	return fmt.Sprintf("%s: %s; %s", e.Key, e.Reason, e.Remedy)
}

// reader reads options key by key, remembering the keys asked for and every
// fault, so that one pass reports them all.
type reader struct {
	options Options
	asked   []string
	faults  []error
}

func (r *reader) fail(key, reason, remedy string) {
	r.faults = append(r.faults, &OptionError{key, reason, remedy})
}

// value returns what is written for a key.
func (r *reader) value(key string) (any, bool) {
	r.asked = append(r.asked, key)
	v, ok := r.options.Values[key]
	return v, ok
}

// whole reads a whole number in [least, most].
func (r *reader) whole(key string, fallback, least, most int) int {
	v, ok := r.value(key)
	if !ok {
		return fallback
	}
	n, ok := asInt(v)
	if !ok {
		r.fail(key, fmt.Sprintf("%v is no whole number", quoted(v)), fmt.Sprintf("write %s = %d", key, fallback))
		return fallback
	}
	if n < int64(least) || n > int64(most) {
		r.fail(key, fmt.Sprintf("%d is out of range", n), fmt.Sprintf("choose %d to %d", least, most))
		return fallback
	}
	return int(n)
}

// count reads the size of a set.
func (r *reader) count(key string, fallback, least int) int {
	return r.whole(key, fallback, least, maxExamples)
}

// seed reads a number of 63 bits: plans have no larger whole numbers.
func (r *reader) seed(key string, fallback uint64) uint64 {
	return uint64(r.whole(key, int(fallback), 0, math.MaxInt))
}

// word reads one of a few known words, the first of which is the default.
func (r *reader) word(key string, known ...string) string {
	s := r.text(key, known[0])
	if !slices.Contains(known, s) {
		r.fail(key, "unknown word "+quoted(s), "known: "+list(known))
		return known[0]
	}
	return s
}

// text reads a string.
func (r *reader) text(key, fallback string) string {
	v, ok := r.value(key)
	if !ok {
		return fallback
	}
	s, ok := v.(string)
	if !ok {
		r.fail(key, fmt.Sprintf("%v is no text", v), fmt.Sprintf("put it in quotation marks: %s = \"%v\"", key, v))
		return fallback
	}
	return s
}

// path reads the path of a file, which must be given if required.
func (r *reader) path(key string, required bool) string {
	before := len(r.faults)
	s := r.text(key, "")
	switch _, given := r.options.Values[key]; {
	case len(r.faults) > before:
	case s == "" && given:
		r.fail(key, "the path is empty", "write the path of a file, or leave the key out")
	case s == "" && required:
		r.fail(key, "is missing", fmt.Sprintf("write %s = \"path of a file\"", key))
	case s != "" && r.options.Folder != "" && !filepath.IsAbs(s):
		return filepath.Join(r.options.Folder, s)
	}
	return s
}

// paths reads a list of paths of files.
func (r *reader) paths(key string) []string {
	paths := r.words(key)
	if _, given := r.options.Values[key]; given && len(paths) == 0 && len(r.faults) == 0 {
		r.fail(key, "the list is empty", fmt.Sprintf("write %s = [\"first.csv\", \"second.csv\"]", key))
	}
	for i, s := range paths {
		switch {
		case s == "":
			r.fail(key, "a path is empty", "write the paths of files")
		case r.options.Folder != "" && !filepath.IsAbs(s):
			paths[i] = filepath.Join(r.options.Folder, s)
		}
	}
	return paths
}

// columns reads a list of columns: names, or numbers from 1.
func (r *reader) columns(key string) (names []string, numbers []int) {
	v, ok := r.value(key)
	if !ok {
		return nil, nil
	}
	items, isList := v.([]any)
	if texts, isTexts := v.([]string); isTexts {
		return texts, nil
	}
	for _, item := range items {
		n, isNumber := asInt(item)
		s, isText := item.(string)
		switch {
		case isText && s != "":
			names = append(names, s)
		case isNumber && n >= 1 && n <= maxLine && !slices.Contains(numbers, int(n)):
			numbers = append(numbers, int(n))
		default:
			r.fail(key, fmt.Sprintf("%v is no column", quoted(item)), "write names, or different numbers from 1")
			return nil, nil
		}
	}
	if !isList || len(items) == 0 || len(names) > 0 && len(numbers) > 0 {
		r.fail(key, fmt.Sprintf("%v is no list of names or of numbers", quoted(v)), fmt.Sprintf("write %s = [\"first\", \"second\"]", key))
		return nil, nil
	}
	return names, numbers
}

// flag reads true or false.
func (r *reader) flag(key string, fallback bool) bool {
	v, ok := r.value(key)
	if !ok {
		return fallback
	}
	b, ok := v.(bool)
	if !ok {
		r.fail(key, fmt.Sprintf("%v is neither true nor false", quoted(v)), fmt.Sprintf("write %s = %t", key, fallback))
		return fallback
	}
	return b
}

// words reads a list of strings.
func (r *reader) words(key string) []string {
	v, ok := r.value(key)
	if !ok {
		return nil
	}
	switch v := v.(type) {
	case []string:
		return slices.Clone(v)
	case []any:
		words := make([]string, 0, len(v))
		for _, item := range v {
			s, ok := item.(string)
			if !ok {
				r.fail(key, fmt.Sprintf("%v is no text", item), fmt.Sprintf("write %s = [\"first\", \"second\"]", key))
				return nil
			}
			words = append(words, s)
		}
		return words
	}
	r.fail(key, fmt.Sprintf("%v is no list", quoted(v)), fmt.Sprintf("write %s = [\"first\", \"second\"]", key))
	return nil
}

// finish reports all faults, keys nobody asked for included.
func (r *reader) finish(name string) error {
	unknown := make([]string, 0, len(r.options.Values))
	for key := range r.options.Values {
		if !slices.Contains(r.asked, key) {
			unknown = append(unknown, key)
		}
	}
	sort.Strings(unknown)
	for _, key := range unknown {
		r.fail(key, "data set "+name+" has no such key", "its keys: "+list(r.asked))
	}
	if len(r.faults) == 1 {
		return r.faults[0]
	}
	return errors.Join(r.faults...)
}

func asInt(v any) (int64, bool) {
	switch v := v.(type) {
	case int64:
		return v, true
	case int:
		return int64(v), true
	}
	return 0, false
}

func quoted(v any) string {
	if s, ok := v.(string); ok {
		return strconv.Quote(s)
	}
	return fmt.Sprint(v)
}

func list(words []string) string { return strings.Join(words, ", ") }
