package quant

import (
	"fmt"
	"strings"
)

// option is one entry of the parentheses behind a name: "key=value", or a bare
// value with an empty key.
type option struct{ key, value string }

// options are what the parentheses hold; take removes what is read, so that rest
// finds what nobody knows.
type options struct{ list []option }

// nameAndOptions splits "NAME(value,key=value,...)". Values may hold parentheses of
// their own.
func nameAndOptions(text string) (name string, o options, err error) {
	name, inside, has := strings.Cut(strings.TrimSpace(text), "(")
	name = strings.TrimSpace(name)
	if !has {
		return name, o, nil
	}
	inside, closed := strings.CutSuffix(inside, ")")
	if !closed {
		return name, o, fmt.Errorf("the options lack their closing parenthesis")
	}
	for _, part := range splitOutside(inside) {
		key, value, pair := cutOutside(part)
		if !pair {
			key, value = "", part
		}
		key = strings.ToLower(strings.TrimSpace(key))
		for _, before := range o.list {
			if key != "" && before.key == key {
				return name, o, fmt.Errorf("option %q is given twice", key)
			}
		}
		o.list = append(o.list, option{key, strings.TrimSpace(value)})
	}
	return name, o, nil
}

// splitOutside splits at the commas that no parenthesis encloses.
func splitOutside(text string) []string {
	var parts []string
	depth, from := 0, 0
	for i := range len(text) {
		switch text[i] {
		case '(':
			depth++
		case ')':
			depth--
		case ',':
			if depth == 0 {
				parts, from = append(parts, text[from:i]), i+1
			}
		}
	}
	return append(parts, text[from:])
}

// cutOutside cuts at the first equals sign that stands before any parenthesis.
func cutOutside(text string) (key, value string, ok bool) {
	at := strings.IndexAny(text, "=(")
	if at < 0 || text[at] == '(' {
		return "", "", false
	}
	return text[:at], text[at+1:], true
}

// take removes and returns the value of a key; the empty key is the first bare
// value.
func (o *options) take(key string) (value string, ok bool) {
	for i, x := range o.list {
		if x.key == key {
			o.list = append(o.list[:i:i], o.list[i+1:]...)
			return x.value, true
		}
	}
	return "", false
}

// rest reports an option that was not taken; known lists those there are.
func (o *options) rest(known string) error {
	if len(o.list) == 0 {
		return nil
	}
	x := o.list[0]
	if x.key == "" {
		return fmt.Errorf("unknown option %q: %s", x.value, known)
	}
	return fmt.Errorf("unknown option %q: %s", x.key, known)
}

// overflow reads the option overflow.
func (o *options) overflow() (Overflow, error) {
	if text, ok := o.take("overflow"); ok {
		return ParseOverflow(text)
	}
	return FormatDefault, nil
}
