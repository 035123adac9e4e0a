package plan

import (
	"strconv"
	"strings"
	"unicode/utf8"
)

// The TOML decoder yields values without places. scan walks the same text and
// notes the line of every key, header and array element, so that an error about
// a value found wrong much later still names its line. It is lenient: what it
// cannot make sense of it passes over, the decoder will complain. It only stops
// at nesting that no plan has and that would take the decoder long.

// place says where a key stands.
type place struct {
	line   int  // 1-based
	inline bool // the value is an inline table { ... }
}

// path addresses a value: keys, and array indices as index(i), joined by
// pathSeparator.
type path string

const pathSeparator = "\x00"

func (p path) key(k string) path {
	if p == "" {
		return path(k)
	}
	return p + pathSeparator + path(k)
}

// index cannot be confused with a key of digits: it starts with a control
// character.
func (p path) index(i int) path {
	return p + pathSeparator + "\x01" + path(strconv.Itoa(i))
}

// scanner is the state of one walk.
type scanner struct {
	text   string
	at     int
	line   int
	depth  int
	deep   int // line on which something is nested too deeply, 0: none
	places map[path]place
	arrays map[path]int // number of [[name]] headers seen, by resolved path
}

// scan returns the place of everything in text that has a path, and the line on
// which something is nested too deeply, 0 if nothing is.
func scan(text string) (places map[path]place, deep int) {
	s := &scanner{
		text: strings.TrimPrefix(text, "\ufeff"), line: 1,
		places: map[path]place{}, arrays: map[path]int{},
	}
	var table path
	for s.blank(); s.at < len(s.text); s.blank() {
		start := s.at
		if s.peek() == '[' {
			table = s.header()
		} else {
			s.pair(table)
		}
		if s.at == start { // a stray character: never stand still
			s.at++
		}
	}
	return s.places, s.deep
}

// tooDeep gives the walk up.
func (s *scanner) tooDeep() {
	s.deep, s.at = s.line, len(s.text)
}

func (s *scanner) peek() byte {
	if s.at < len(s.text) {
		return s.text[s.at]
	}
	return 0
}

// note records the first place of a path; a table may be opened several times.
func (s *scanner) note(p path) {
	if _, known := s.places[p]; !known {
		s.places[p] = place{line: s.line}
	}
}

// blank skips white space, line ends and comments.
func (s *scanner) blank() {
	for s.at < len(s.text) {
		switch s.text[s.at] {
		case '\n':
			s.line++
		case ' ', '\t', '\r':
		case '#':
			s.toLineEnd()
			continue
		default:
			return
		}
		s.at++
	}
}

// space skips white space within a line.
func (s *scanner) space() {
	for s.peek() == ' ' || s.peek() == '\t' {
		s.at++
	}
}

func (s *scanner) toLineEnd() {
	if n := strings.IndexByte(s.text[s.at:], '\n'); n >= 0 {
		s.at += n
	} else {
		s.at = len(s.text)
	}
}

// header reads [a.b] or [[a.b]] and returns the path that the following pairs
// belong to. Within a header, a name of an array of tables means its last
// element (TOML 1.0, "Array of Tables").
func (s *scanner) header() path {
	s.at++
	double := s.peek() == '['
	if double {
		s.at++
	}
	names := s.names(']')
	var p path
	for i, name := range names {
		p = p.key(name)
		last := i == len(names)-1
		if last && double {
			s.arrays[p]++
			s.note(p)
		} else if s.arrays[p] == 0 {
			s.note(p)
		}
		if n := s.arrays[p]; n > 0 {
			p = p.index(n - 1)
			s.note(p)
		}
	}
	for s.peek() == ']' {
		s.at++
	}
	return p
}

// pair reads key = value below table.
func (s *scanner) pair(table path) {
	p := table
	for _, name := range s.names('=') {
		p = p.key(name)
		s.note(p)
	}
	if s.peek() == '=' {
		s.at++
	}
	s.space()
	s.value(p)
}

// names reads a dotted key up to, not including, the byte end.
func (s *scanner) names(end byte) []string {
	var names []string
	for s.at < len(s.text) {
		if len(names) > maxNesting {
			s.tooDeep()
			return nil
		}
		s.space()
		switch c := s.peek(); {
		case c == end || c == '\n' || c == 0:
			return names
		case c == '.':
			s.at++
		case c == '"' || c == '\'':
			names = append(names, s.quoted())
		default:
			start := s.at
			for s.at < len(s.text) && !strings.ContainsRune(" \t\r\n.=]\"'", rune(s.text[s.at])) {
				s.at++
			}
			if s.at == start { // a stray ] or =
				return names
			}
			names = append(names, s.text[start:s.at])
		}
	}
	return names
}

// maxNesting bounds the depth of arrays and inline tables and the names of a key.
const maxNesting = 32

// value skips one value, noting the keys and elements inside it.
func (s *scanner) value(p path) {
	if s.depth++; s.depth > maxNesting {
		s.tooDeep()
	} else {
		switch s.peek() {
		case '{':
			s.places[p] = place{line: s.places[p].line, inline: true}
			s.at++
			s.elements('}', func(int) { s.pair(p) })
		case '[':
			s.at++
			s.elements(']', func(i int) {
				s.note(p.index(i))
				s.value(p.index(i))
			})
		case '"', '\'':
			s.quoted()
		default: // number, boolean, date: up to a delimiter
			for s.at < len(s.text) && !strings.ContainsRune(",]}#\n", rune(s.text[s.at])) {
				s.at++
			}
		}
	}
	s.depth--
}

// elements reads comma-separated elements up to and including the byte end.
func (s *scanner) elements(end byte, one func(i int)) {
	for i := 0; s.at < len(s.text); i++ {
		s.blank()
		if s.peek() == end {
			s.at++
			return
		}
		start := s.at
		one(i)
		s.blank()
		if s.peek() == ',' {
			s.at++
		} else if s.peek() != end && s.at == start {
			s.at++ // never stand still
		}
	}
}

// quoted reads a string of any of the four kinds and returns its value.
func (s *scanner) quoted() string {
	q := s.text[s.at]
	long := strings.HasPrefix(s.text[s.at:], strings.Repeat(string(q), 3))
	width := 1
	if long {
		width = 3
	}
	s.at += width
	var b strings.Builder
	for s.at < len(s.text) {
		c := s.text[s.at]
		switch {
		case c == '\\' && q == '"':
			s.escape(&b)
			continue
		case c == q && !long:
			s.at++
			return b.String()
		case c == q && strings.HasPrefix(s.text[s.at:], strings.Repeat(string(q), 3)):
			s.at += 3
			for n := 0; n < 2 && s.peek() == q; n++ { // up to two quotes may touch the end
				b.WriteByte(q)
				s.at++
			}
			return b.String()
		case c == '\n':
			if !long {
				return b.String()
			}
			s.line++
		}
		b.WriteByte(c)
		s.at++
	}
	return b.String()
}

// escape reads one backslash sequence of a basic string. Only keys need the
// value, and there it must equal the decoder's.
func (s *scanner) escape(b *strings.Builder) {
	s.at++
	c := s.peek()
	digits := map[byte]int{'x': 2, 'u': 4, 'U': 8}[c]
	if digits > 0 && s.at+digits < len(s.text) {
		if n, err := strconv.ParseUint(s.text[s.at+1:s.at+1+digits], 16, 32); err == nil && utf8.ValidRune(rune(n)) {
			b.WriteRune(rune(n))
			s.at += 1 + digits
			return
		}
	}
	if i := strings.IndexByte(`btnfre"\`, c); i >= 0 && c != 0 {
		b.WriteByte("\b\t\n\f\r\x1b\"\\"[i])
		s.at++
	}
	// A backslash before a line end of a multi-line string: the line end is
	// counted by the caller.
}
