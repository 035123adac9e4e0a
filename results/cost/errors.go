package cost

import (
	"errors"
	"fmt"
	"strings"
)

// FieldError is one thing wrong with a table, a network or an arm. Elements of
// lists are counted from 1: "rate[2].multiply_adds".
type FieldError struct {
	Field  string // as the field is called in a file
	Reason string // lower case, no full stop
	Remedy string // lower case, an instruction
}

// Error is "field: reason; remedy".
func (e *FieldError) Error() string {
	return fmt.Sprintf("%s: %s; %s", e.Field, e.Reason, e.Remedy)
}

// FieldErrors returns the field errors that an error of this package holds, so
// that a reader of files can add file and line to each; nil if it holds none.
func FieldErrors(err error) []*FieldError {
	var all fieldErrors
	if errors.As(err, &all) {
		return all
	}
	return nil
}

// fieldErrors are all the things wrong, in the order of the fields.
type fieldErrors []*FieldError

// Error has one line for each thing wrong.
func (e fieldErrors) Error() string {
	lines := make([]string, len(e))
	for i, one := range e {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

// Unwrap lets errors.As find each *FieldError.
func (e fieldErrors) Unwrap() []error {
	all := make([]error, len(e))
	for i, one := range e {
		all[i] = one
	}
	return all
}

func (e *fieldErrors) add(field, reason, remedy string) {
	*e = append(*e, &FieldError{strings.TrimPrefix(field, "."), reason, remedy})
}

// err is nil when nothing was found wrong.
func (e fieldErrors) err() error {
	if len(e) == 0 {
		return nil
	}
	return e
}

// positive adds an error unless the value is a finite number above zero.
func (e *fieldErrors) positive(field string, value float64, what string) {
	if !(value > 0) || value > 1e30 {
		e.add(field, fmt.Sprintf("%v is not a finite number above zero", value), "give "+what)
	}
}

// notNegative adds an error unless the value is a finite number, zero or above.
func (e *fieldErrors) notNegative(field string, value float64, what string) {
	if !(value >= 0) || value > 1e30 {
		e.add(field, fmt.Sprintf("%v is not a finite number, zero or above", value), "give "+what)
	}
}
