package datasets

import (
	"fmt"
	"strings"
	"unicode"
)

// FileError says what is wrong with a file, where, and what to do.
type FileError struct {
	File   string
	Line   int   // from 1; 0: no line known
	Column int   // field of the line, from 1; 0: none
	Offset int64 // byte in the decompressed data, from 0; -1: none
	Reason string
	Remedy string
	Err    error // what the system or a decoder reported; may be nil
}

// Error names file, place, reason and remedy in one line: control characters that
// come from the file become spaces.
func (e *FileError) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ", line %d", e.Line)
	}
	if e.Column > 0 {
		fmt.Fprintf(&b, ", column %d", e.Column)
	}
	if e.Offset >= 0 {
		fmt.Fprintf(&b, ", byte %d", e.Offset)
	}
	b.WriteString(": " + e.Reason)
	if e.Err != nil {
		fmt.Fprintf(&b, ": %v", e.Err)
	}
	b.WriteString("; " + e.Remedy)
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) {
			return ' '
		}
		return r
	}, b.String())
}

// Unwrap returns what the system or a decoder reported.
func (e *FileError) Unwrap() error { return e.Err }
