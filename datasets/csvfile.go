package datasets

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"unicode"
)

// csvTable is the rows of one file, or of several one after another: numbers, and a
// label or targets each.
type csvTable struct {
	file     string // the first
	further  []csvFile
	columns  []csvColumn // the features, in the order of the file
	values   []float64   // [rows, len(columns)]
	labels   []int32     // of each row, an index into distinct; none in a regression
	targets  []csvColumn // of a regression
	truths   []float64   // [rows, len(targets)]
	distinct []string    // labels in the order they first occur
	lines    []int       // where each row begins, from 1
	// suspect says that the line taken for names holds numbers only.
	suspect bool
}

// csvFile says from which row on rows are another file's.
type csvFile struct {
	row  int
	file string
}

// rows is their number.
func (t *csvTable) rows() int { return len(t.lines) }

// place is the file and the line of a row.
func (t *csvTable) place(row int) (file string, line int) {
	file = t.file
	for _, f := range t.further {
		if row >= f.row {
			file = f.file
		}
	}
	return file, t.lines[row]
}

// csvColumn is one feature or target.
type csvColumn struct {
	field int    // of the row, from 0
	name  string // "" where the file has no names
}

// csvLayout says how to read a file.
type csvLayout struct {
	delimiter   rune
	header      bool   // the first line holds names
	label       string // name of the label column, or "" and
	labelColumn int    // its number, from 1
	ignore      []string
	targets     []csvPick // of a regression, in place of a label
}

// csvPick names a column, or numbers it from 1.
type csvPick struct {
	name   string
	number int
}

// String is how a plan writes it.
func (p csvPick) String() string {
	if p.name != "" {
		return strconv.Quote(p.name)
	}
	return strconv.Itoa(p.number)
}

// csvReader reads one file row by row.
type csvReader struct {
	csvLayout
	table  *csvTable
	rows   *csv.Reader
	fields int              // of every row; 0 before the first
	target int              // field of the label, from 0; -1 in a regression
	known  map[string]int32 // labels so far
}

// readCSV reads a whole file. Memory follows what really comes; text that is too
// long, or a line that is, ends it.
func readCSV(in *input, layout csvLayout) (*csvTable, error) {
	buffered := bufio.NewReader(&limitReader{in: in})
	if mark, _ := buffered.Peek(3); bytes.Equal(mark, []byte("\xEF\xBB\xBF")) {
		buffered.Discard(3) // the byte order mark some spreadsheets write
	}
	r := &csvReader{csvLayout: layout, table: &csvTable{file: in.name}, rows: csv.NewReader(buffered), known: map[string]int32{}}
	r.rows.Comma = layout.delimiter
	r.rows.FieldsPerRecord = -1 // counted here, for a better message
	r.rows.ReuseRecord = true
	r.rows.TrimLeadingSpace = !unicode.IsSpace(layout.delimiter) // it would drop empty fields
	for {
		fields, err := r.rows.Read()
		switch {
		case err == io.EOF && r.table.rows() == 0:
			return nil, &FileError{File: in.name, Offset: -1, Reason: "there are no rows of data", Remedy: "give a file with examples"}
		case err == io.EOF:
			return r.table, nil
		case err != nil:
			return nil, r.decoding(err)
		}
		if err := r.row(fields); err != nil {
			return nil, err
		}
	}
}

// limitReader fails where a text or a line is too long.
type limitReader struct {
	in   *input
	line int // bytes since the last end of a line
}

func (l *limitReader) Read(p []byte) (int, error) {
	n, err := l.in.Read(p)
	if end := bytes.LastIndexByte(p[:n], '\n'); end >= 0 {
		l.line = n - end - 1
	} else {
		l.line += n
	}
	switch {
	case l.in.offset > maxText:
		return 0, l.in.fault(l.in.offset, fmt.Sprintf("the text is longer than %d bytes", maxText), "split it, or store it in binary form")
	case l.line > maxLine:
		return 0, l.in.fault(l.in.offset, fmt.Sprintf("a line is longer than %d bytes", maxLine), "give a file of CSV")
	}
	return n, err
}

// decoding says in our words what encoding/csv reports.
func (r *csvReader) decoding(err error) error {
	var file *FileError
	if errors.As(err, &file) {
		return file
	}
	var parse *csv.ParseError
	if errors.As(err, &parse) {
		reason := "the line is no valid CSV"
		if parse.StartLine != parse.Line {
			reason = fmt.Sprintf("the row that begins in line %d is no valid CSV", parse.StartLine)
		}
		return &FileError{File: r.table.file, Line: parse.Line, Offset: -1, Reason: reason, Err: parse.Err, Remedy: "correct the quotation marks"}
	}
	return &FileError{File: r.table.file, Offset: -1, Reason: "the file cannot be read", Err: err, Remedy: "check the file"}
}

// fault places an error at a field of the current row, from 0; -1 is the row.
func (r *csvReader) fault(field int, reason, remedy string) error {
	e := &FileError{File: r.table.file, Offset: -1, Reason: reason, Remedy: remedy}
	e.Line, _ = r.rows.FieldPos(max(field, 0))
	e.Column = field + 1
	return e
}

// row takes one record in: the names, or an example.
func (r *csvReader) row(fields []string) error {
	if r.fields == 0 {
		if err := r.layOut(fields); err != nil || r.header {
			return err
		}
	}
	if len(fields) != r.fields {
		return r.fault(-1, fmt.Sprintf("the row has %d fields, the first line has %d", len(fields), r.fields), "make all rows equally long")
	}
	if len(r.table.values) > maxValues-len(fields) || r.table.rows() >= maxExamples {
		return r.fault(-1, fmt.Sprintf("the file holds more than %d values or %d rows", maxValues, maxExamples), "use fewer rows")
	}
	return r.example(fields)
}

// layOut finds the label's column and the features from the first line.
func (r *csvReader) layOut(fields []string) error {
	r.fields = len(fields)
	names := make([]string, len(fields))
	if r.header {
		numbers := 0
		for i, f := range fields {
			names[i] = strings.Clone(strings.TrimSpace(f))
			if _, err := strconv.ParseFloat(names[i], 64); err == nil {
				numbers++
			}
		}
		r.table.suspect = numbers == len(fields)
	}
	used, err := r.special(names)
	if err != nil {
		return err
	}
	for i, name := range names {
		if !used[i] {
			r.table.columns = append(r.table.columns, csvColumn{i, name})
		}
	}
	if len(r.table.columns) == 0 {
		return r.fault(-1, "no column is left for features", "give a file with at least one column of numbers besides the label or the targets")
	}
	return nil
}

// special marks the columns that are no features: the label's and the ignored.
func (r *csvReader) special(names []string) (used map[int]bool, err error) {
	used = map[int]bool{}
	for _, pick := range r.targets {
		i := pick.number - 1
		if pick.name != "" {
			if i, err = r.named(names, pick.name, "targets"); err != nil {
				return nil, err
			}
		}
		if i >= len(names) {
			return nil, r.fault(-1, fmt.Sprintf("there is no column %d for a target: the line has %d fields", pick.number, len(names)), "correct targets, or the delimiter")
		}
		if used[i] {
			return nil, r.fault(i, "the column is a target twice", "name it once")
		}
		used[i] = true
		r.table.targets = append(r.table.targets, csvColumn{i, names[i]})
	}
	if r.target = r.labelColumn - 1; r.label != "" {
		if r.target, err = r.named(names, r.label, "label"); err != nil {
			return nil, err
		}
	}
	if r.target >= len(names) {
		return nil, r.fault(-1, fmt.Sprintf("there is no column %d for the label: the line has %d fields", r.labelColumn, len(names)), "correct label, or the delimiter")
	}
	if r.target >= 0 {
		used[r.target] = true
	}
	for _, name := range r.ignore {
		i, err := r.named(names, name, "ignore")
		if err != nil {
			return nil, err
		}
		used[i] = true
	}
	return used, nil
}

// named finds a column by its name.
func (r *csvReader) named(names []string, name, key string) (int, error) {
	found := -1
	for i, n := range names {
		switch {
		case n != name:
		case found >= 0:
			return 0, r.fault(i, fmt.Sprintf("the name %q occurs twice", name), "rename one of the columns")
		default:
			found = i
		}
	}
	if found < 0 {
		shown := names[:min(len(names), 20)]
		return 0, r.fault(-1, fmt.Sprintf("no column is called %q", name), "correct "+key+"; the columns: "+strings.Join(shown, ", "))
	}
	return found, nil
}

// example appends one row.
func (r *csvReader) example(fields []string) error {
	var err error
	if r.table.values, err = r.numbers(r.table.values, r.table.columns, fields); err != nil {
		return err
	}
	if r.table.truths, err = r.numbers(r.table.truths, r.table.targets, fields); err != nil {
		return err
	}
	if r.target >= 0 {
		if err := r.class(fields); err != nil {
			return err
		}
	}
	line, _ := r.rows.FieldPos(0)
	r.table.lines = append(r.table.lines, line)
	return nil
}

// numbers appends those of some columns of a row.
func (r *csvReader) numbers(all []float64, columns []csvColumn, fields []string) ([]float64, error) {
	for _, c := range columns {
		x, err := r.number(c, strings.TrimSpace(fields[c.field]))
		if err != nil {
			return nil, err
		}
		all = append(all, x)
	}
	return all, nil
}

// class appends the label of a row.
func (r *csvReader) class(fields []string) error {
	label := strings.TrimSpace(fields[r.target])
	if label == "" {
		return r.fault(r.target, "the label is empty", "fill it in or remove the row")
	}
	n, ok := r.known[label]
	if !ok {
		if len(r.known) == maxClasses {
			return r.fault(r.target, fmt.Sprintf("the label column has more than %d different values", maxClasses), "name the column that holds the class")
		}
		n = int32(len(r.known))
		label = strings.Clone(label) // not the whole line with it
		r.known[label] = n
		r.table.distinct = append(r.table.distinct, label)
	}
	r.table.labels = append(r.table.labels, n)
	return nil
}

// join puts the rows of another file behind those of the table. Its columns must be
// the same, by name and place.
func (t *csvTable) join(next *csvTable) error {
	if err := t.sameColumns(next); err != nil {
		return err
	}
	if len(t.values) > maxValues-len(next.values) || t.rows() > maxExamples-next.rows() {
		return &FileError{File: next.file, Offset: -1, Reason: fmt.Sprintf("with the files before it there are more than %d values or %d rows", maxValues, maxExamples), Remedy: "use fewer rows"}
	}
	number := make([]int32, len(next.distinct))
	for i, label := range next.distinct {
		at := slices.Index(t.distinct, label)
		if at < 0 {
			if at = len(t.distinct); at == maxClasses {
				return &FileError{File: next.file, Offset: -1, Reason: fmt.Sprintf("with the files before it there are more than %d different labels", maxClasses), Remedy: "name the column that holds the class"}
			}
			t.distinct = append(t.distinct, label)
		}
		number[i] = int32(at)
	}
	t.further = append(t.further, csvFile{t.rows(), next.file})
	for _, n := range next.labels {
		t.labels = append(t.labels, number[n])
	}
	t.values, t.truths = append(t.values, next.values...), append(t.truths, next.truths...)
	t.lines = append(t.lines, next.lines...)
	t.suspect = t.suspect || next.suspect
	return nil
}

// sameColumns holds another file to the columns of the table.
func (t *csvTable) sameColumns(other *csvTable) error {
	fault := func(column int, reason string, args ...any) error {
		return &FileError{File: other.file, Line: 1, Column: column, Offset: -1, Reason: fmt.Sprintf(reason, args...), Remedy: "give files with the same columns in the same order"}
	}
	if len(other.columns) != len(t.columns) {
		return fault(0, "%d features, but %s has %d", len(other.columns), t.file, len(t.columns))
	}
	for i, c := range other.columns {
		if want := t.columns[i]; c.name != want.name {
			return fault(c.field+1, "feature %d is called %q, in %s %q", i+1, c.name, t.file, want.name)
		}
	}
	return nil
}

// number reads one feature or target.
func (r *csvReader) number(c csvColumn, text string) (float64, error) {
	what := quoted(text)
	if len(text) > 40 {
		what = quoted(text[:40]) + "..."
	}
	if c.name != "" {
		what = fmt.Sprintf("%s of %q", what, c.name)
	}
	x, err := strconv.ParseFloat(text, 64)
	switch {
	case text == "":
		return 0, r.fault(c.field, "the field is empty", "fill it in or remove the row")
	case errors.Is(err, strconv.ErrRange) || err == nil && x-x != 0:
		return 0, r.fault(c.field, what+" is not a finite number", "correct it or remove the row")
	case err != nil && !r.header && r.table.rows() == 0:
		return 0, r.fault(c.field, what+" is no number", "write header = true if the first line holds names, else correct it or ignore the column")
	case err != nil:
		return 0, r.fault(c.field, what+" is no number", "correct it, or remove the row or the column")
	}
	return x, nil
}
