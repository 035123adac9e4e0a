package datasets

import (
	"fmt"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// CSV reads tables of numbers with a label column, or in a regression with columns of
// targets: text by RFC 4180, plain or gzip, an example a row. Spaces around fields are
// dropped. Every column but the label's, the targets' and the ignored ones is a
// feature, in the order of the file; the shape of an example is [features]. Outputs are
// the targets in the order given. Several files with the same columns are read as one,
// row after row.
//
// The test set is a file of its own, or every k-th row (k, 2k, ... of the rows of
// data, counted from 1); the rest is training data and is split further by the
// package's rules. Classes are numbered in the order given, else sorted: as
// numbers where all labels of File are whole numbers, else by their bytes. A label
// of another file that is none of them is an error.
type CSV struct {
	File           string // path, or
	Files          []string
	TestFile       string // path; "": TestEvery, or no test set
	ValidationFile string // path; "": taken from File

	Label       string // name of the label column, or
	LabelColumn int    // its number from 1; exactly one of the two, or
	Targets     []string
	// TargetColumns are numbers from 1, where the files have no names.
	TargetColumns []int
	NoHeader      bool // the first line holds data, not names
	Ignore        []string
	ClassNames    []string // in order; nil: sorted
	Delimiter     string   // one character; "": comma

	Train           int // first n of what the other sets leave; 0: all
	Validation      int // last n of the training rows; else first n of those taken; 0: all of them
	ValidationEvery int // every k-th training row; 0: off the end
	Test            int // first n of the test rows; 0: all
	TestEvery       int // every k-th row of File; 0: none

	// Scale is Standardise (or empty): each feature by mean and deviation of its
	// training values; AsIs: the numbers of the file.
	Scale string

	loaded cache
}

func newCSV(r *reader) Source {
	s := &CSV{
		File: r.path("file", false), Files: r.paths("files"),
		TestFile:       r.path("test_file", false),
		ValidationFile: r.path("validation_file", false),
	}
	s.Targets, s.TargetColumns = r.columns("targets")
	if _, regression := r.options.Values["targets"]; !regression {
		s.Label, s.LabelColumn = readLabel(r)
	} else if _, both := r.value("label"); both {
		r.fail("label", "there are targets too", "keep label for classes, or targets for a regression")
	}
	s.NoHeader = !r.flag("header", true)
	s.Ignore = r.words("ignore")
	s.ClassNames = r.words("classes")
	s.Delimiter = r.text("delimiter", ",")
	part := readSplit(r)
	s.Train, s.Validation, s.ValidationEvery = part.train, part.validation, part.validationEvery
	s.Test = r.count("test", 0, 1)
	s.TestEvery = r.whole("test_every", 0, 2, maxExamples)
	s.Scale = r.word("scale", Standardise, AsIs)
	if err := s.check(); err != nil && len(r.faults) == 0 {
		r.faults = append(r.faults, err)
	}
	return s
}

// readLabel reads a name or a number.
func readLabel(r *reader) (name string, number int) {
	v, ok := r.value("label")
	if n, isNumber := asInt(v); isNumber {
		if n < 1 || n > maxLine {
			r.fail("label", fmt.Sprintf("%d is out of range", n), "columns are counted from 1")
		}
		return "", int(n)
	}
	name, isText := v.(string)
	switch {
	case !ok || name == "" && isText:
		r.fail("label", "is missing", "write label = \"name of the label column\", or its number from 1")
	case !isText:
		r.fail("label", fmt.Sprintf("%v is neither a name nor a number", v), "write label = \"name of the label column\", or its number from 1")
	}
	return name, 0
}

func (s *CSV) scale() string     { return orElse(s.Scale, Standardise) }
func (s *CSV) delimiter() string { return orElse(s.Delimiter, ",") }

func (s *CSV) split() split { return split{s.Train, s.Validation, s.ValidationEvery} }

// check finds options that are wrong by themselves or with each other.
func (s *CSV) check() error {
	fault := func(key, reason, remedy string) error { return &OptionError{key, reason, remedy} }
	delimiter, size := utf8.DecodeRuneInString(s.delimiter())
	switch {
	case s.File == "" && len(s.Files) == 0:
		return fault("file", "is missing", "write file = \"path of a file\"")
	case s.File != "" && len(s.Files) > 0:
		return fault("files", "there is a file too", "keep one of the two")
	case s.regression():
		if err := s.checkTargets(); err != nil {
			return err
		}
	case (s.Label == "") == (s.LabelColumn == 0) || s.LabelColumn < 0:
		return fault("label", "must be one name or one number from 1", "write label = \"name of the label column\", or its number")
	case s.NoHeader && s.Label != "":
		return fault("label", fmt.Sprintf("%q names a column, but the file has no names", s.Label), "give the column's number from 1, or header = true")
	}
	switch {
	case s.NoHeader && len(s.Ignore) > 0:
		return fault("ignore", "it names columns, but the file has no names", "leave it out, or write header = true")
	case s.Label != "" && slices.Contains(s.Ignore, s.Label):
		return fault("ignore", fmt.Sprintf("%q is the label", s.Label), "take it out")
	case size != len(s.delimiter()) || strings.ContainsRune("\"\r\n\x00", delimiter) || delimiter == utf8.RuneError:
		return fault("delimiter", fmt.Sprintf("%q is no single separating character", s.Delimiter), "write delimiter = \";\"")
	case s.scale() != Standardise && s.scale() != AsIs:
		return fault("scale", "unknown word "+quoted(s.Scale), "known: "+list([]string{Standardise, AsIs}))
	case len(s.ClassNames) == 1 || len(s.ClassNames) > maxClasses:
		return fault("classes", fmt.Sprintf("%d classes are given", len(s.ClassNames)), fmt.Sprintf("give 2 to %d, or leave the key out", maxClasses))
	case twice(s.ClassNames) != "":
		return fault("classes", fmt.Sprintf("%q is given twice", twice(s.ClassNames)), "keep one")
	}
	if err := s.checkSplits(); err != nil {
		return err
	}
	return s.split().check()
}

// regression reports whether there are targets in place of labels.
func (s *CSV) regression() bool { return len(s.Targets)+len(s.TargetColumns) > 0 }

// checkTargets finds what does not go with the targets of a regression.
func (s *CSV) checkTargets() error {
	fault := func(key, reason, remedy string) error { return &OptionError{key, reason, remedy} }
	switch n := len(s.Targets) + len(s.TargetColumns); {
	case s.Label != "" || s.LabelColumn != 0:
		return fault("label", "there are targets too", "keep label for classes, or targets for a regression")
	case s.ClassNames != nil:
		return fault("classes", "a regression has none", "leave it out")
	case n > maxClasses:
		return fault("targets", fmt.Sprintf("%d targets are given", n), fmt.Sprintf("give 1 to %d", maxClasses))
	case twice(s.Targets) != "":
		return fault("targets", fmt.Sprintf("%q is given twice", twice(s.Targets)), "keep one")
	case s.NoHeader && len(s.Targets) > 0:
		return fault("targets", fmt.Sprintf("%q names a column, but the file has no names", s.Targets[0]), "give the columns' numbers from 1, or header = true")
	}
	for _, name := range s.Targets {
		if slices.Contains(s.Ignore, name) {
			return fault("ignore", fmt.Sprintf("%q is a target", name), "take it out")
		}
	}
	return nil
}

// picks are the targets as the reader of files wants them.
func (s *CSV) picks() (all []csvPick) {
	for _, name := range s.Targets {
		all = append(all, csvPick{name: name})
	}
	for _, n := range s.TargetColumns {
		all = append(all, csvPick{number: n})
	}
	return all
}

// checkSplits finds two ways to make one set, or none.
func (s *CSV) checkSplits() error {
	fault := func(key, reason, remedy string) error { return &OptionError{key, reason, remedy} }
	switch {
	case s.TestEvery < 0 || s.TestEvery == 1:
		return fault("test_every", fmt.Sprintf("%d is out of range", s.TestEvery), "choose 2 or more")
	case s.TestEvery > 0 && s.TestFile != "":
		return fault("test_every", "there is a test_file too", "keep one of the two")
	case s.Test < 0:
		return fault("test", fmt.Sprintf("%d is out of range", s.Test), "choose 1 or more, or 0 for all")
	case s.Test > 0 && s.TestEvery == 0 && s.TestFile == "":
		return fault("test", "nothing says which rows are for the test", "give test_file, or test_every = 5 for every fifth row")
	case s.ValidationEvery > 0 && s.ValidationFile != "":
		return fault("validation_every", "there is a validation_file too", "keep one of the two")
	}
	return nil
}

// twice returns a word that occurs twice, or "".
func twice(words []string) string {
	seen := map[string]bool{}
	for _, w := range words {
		if seen[w] {
			return w
		}
		seen[w] = true
	}
	return ""
}

// Canonical implements Source.
func (s *CSV) Canonical() string {
	label := strconv.Quote(s.Label)
	if s.Label == "" {
		label = strconv.Itoa(s.LabelColumn)
	}
	targets := ""
	if s.regression() {
		targets = fmt.Sprintf(" targets=%v", s.picks())
	}
	return fmt.Sprintf("csv label=%s header=%t ignore=%q classes=%q delimiter=%q train=%d validation=%d validation_every=%d validation_file=%t test=%d test_every=%d test_file=%t scale=%s%s",
		label, !s.NoHeader, s.Ignore, s.ClassNames, s.delimiter(), s.Train, s.Validation, s.ValidationEvery, s.ValidationFile != "", s.Test, s.TestEvery, s.TestFile != "", s.scale(), targets)
}

// Facts implements Source. It reads the files.
func (s *CSV) Facts() (Facts, error) {
	d, err := s.Load(0)
	if err != nil {
		return Facts{}, err
	}
	return d.facts(), nil
}

// Load implements Source.
func (s *CSV) Load(uint64) (*Data, error) {
	if err := s.check(); err != nil {
		return nil, err
	}
	return s.loaded.get(s.load)
}

func (s *CSV) load() (*Data, error) {
	p, err := s.parts()
	if err != nil {
		return nil, err
	}
	if p.classes, err = s.classes(p.main); err != nil {
		return nil, err
	}
	e := &examples{shape: []int{len(p.main.columns)}, classNames: p.classes}
	outputs := fmt.Sprintf("%d classes", len(p.classes))
	if s.regression() {
		e.targetNames = p.main.targetNames()
		outputs = fmt.Sprintf("targets %s", shown(e.targetNames))
	}
	if !s.NoHeader {
		for _, c := range p.main.columns {
			e.featureNames = append(e.featureNames, c.name)
		}
	}
	if e.train, err = p.main.pick(p.train, p.classes); err != nil {
		return nil, err
	}
	if e.validation, err = p.validationTable.pick(p.validation, p.classes); err != nil {
		return nil, err
	}
	if e.test, err = p.testTable.pick(p.test, p.classes); err != nil {
		return nil, err
	}
	description := fmt.Sprintf("CSV file %s: %d training, %d validation, %d test rows of %d features, %s",
		filepath.Base(p.main.file), len(p.train), len(p.validation), len(p.test), len(p.main.columns), outputs)
	if more := len(p.main.further); more > 0 {
		description = fmt.Sprintf("CSV file %s and %d more%s", filepath.Base(p.main.file), more, strings.TrimPrefix(description, "CSV file "+filepath.Base(p.main.file)))
	}
	d, err := e.finish(s.scale(), description, true)
	if err == nil && p.main.suspect {
		d.Warnings = append(d.Warnings, "the first line of "+filepath.Base(p.main.file)+" was taken for names but holds numbers only; write header = false if it is data")
	}
	return d, err
}

// csvParts are the tables, and which of their rows go to which set.
type csvParts struct {
	main, validationTable, testTable *csvTable
	train, validation, test          []int
	classes                          []string
}

// parts reads the files and deals their rows out.
func (s *CSV) parts() (p *csvParts, err error) {
	p = &csvParts{}
	if p.main, err = s.readAll(); err != nil {
		return nil, err
	}
	p.train = counting(p.main.rows())
	p.testTable, p.validationTable = p.main, p.main
	if s.TestEvery > 0 {
		p.train, p.test = everyNth(p.train, s.TestEvery)
	}
	if s.TestFile != "" {
		if p.testTable, p.test, err = s.second("test_file", s.TestFile, p.main); err != nil {
			return nil, err
		}
	}
	if s.TestEvery > 0 && len(p.test) == 0 {
		return nil, &OptionError{"test_every", fmt.Sprintf("the file has %d rows: none is for the test", len(p.train)), "choose a smaller number"}
	}
	if p.test, err = first("test", p.test, s.Test); err != nil {
		return nil, err
	}
	if s.ValidationFile == "" {
		p.train, p.validation, err = s.split().divide(p.train)
		return p, err
	}
	if p.validationTable, p.validation, err = s.second("validation_file", s.ValidationFile, p.main); err != nil {
		return nil, err
	}
	if p.validation, err = first("validation", p.validation, s.Validation); err != nil {
		return nil, err
	}
	p.train, err = first("train", p.train, s.Train)
	return p, err
}

// readAll reads File, or Files as one table.
func (s *CSV) readAll() (*csvTable, error) {
	if len(s.Files) == 0 {
		return s.read("file", s.File)
	}
	var all *csvTable
	for _, path := range s.Files {
		t, err := s.read("files", path)
		if err != nil {
			return nil, err
		}
		if all == nil {
			all = t
		} else if err := all.join(t); err != nil {
			return nil, err
		}
	}
	return all, nil
}

func (s *CSV) read(key, path string) (*csvTable, error) {
	in, err := openInput(key, path)
	if err != nil {
		return nil, err
	}
	defer in.close()
	delimiter, _ := utf8.DecodeRuneInString(s.delimiter())
	return readCSV(in, csvLayout{delimiter, !s.NoHeader, s.Label, s.LabelColumn, s.Ignore, s.picks()})
}

// second reads a further file and holds its columns to those of the first.
func (s *CSV) second(key, path string, main *csvTable) (*csvTable, []int, error) {
	t, err := s.read(key, path)
	if err != nil {
		return nil, nil, err
	}
	if err := main.sameColumns(t); err != nil {
		return nil, nil, err
	}
	return t, counting(t.rows()), nil
}

// classes are those given, or the sorted labels of all rows of File: they do not
// change with the sizes of the sets.
func (s *CSV) classes(main *csvTable) ([]string, error) {
	if s.ClassNames != nil || s.regression() {
		return s.ClassNames, nil
	}
	names := slices.Clone(main.distinct)
	if len(names) < 2 {
		return nil, &FileError{File: main.file, Offset: -1, Reason: fmt.Sprintf("all rows have the label %q", names[0]), Remedy: "give data with two classes or more"}
	}
	sortLabels(names)
	return names, nil
}

// sortLabels sorts whole numbers by value, else by bytes.
func sortLabels(names []string) {
	value := map[string]int64{}
	for _, name := range names {
		n, err := strconv.ParseInt(name, 10, 64)
		if err != nil {
			slices.Sort(names)
			return
		}
		value[name] = n
	}
	slices.SortFunc(names, func(a, b string) int {
		if value[a] != value[b] {
			if value[a] < value[b] {
				return -1
			}
			return 1
		}
		return strings.Compare(a, b)
	})
}

// targetNames are the names of the targets, or their numbers.
func (t *csvTable) targetNames() (names []string) {
	for _, c := range t.targets {
		name := c.name
		if name == "" {
			name = fmt.Sprintf("column %d", c.field+1)
		}
		names = append(names, name)
	}
	return names
}

// pick copies the given rows.
func (t *csvTable) pick(rows []int, classes []string) (s rawSet, err error) {
	s.at = slice(gather(t.values, rows, len(t.columns)))
	s.where = func(i int) string {
		file, line := t.place(rows[i])
		return fmt.Sprintf("%s, line %d", file, line)
	}
	if len(t.targets) > 0 {
		s.targets = gather(t.truths, rows, len(t.targets))
		return s, nil
	}
	number := make([]int32, len(t.distinct)) // of each distinct label
	for i, label := range t.distinct {
		number[i] = int32(slices.Index(classes, label))
	}
	s.labels = make([]int32, len(rows))
	for i, row := range rows {
		label := t.labels[row]
		if s.labels[i] = number[label]; s.labels[i] < 0 {
			file, line := t.place(row)
			return s, &FileError{File: file, Line: line, Offset: -1, Reason: fmt.Sprintf("the label %q is none of the classes %s", t.distinct[label], shown(classes)), Remedy: "correct the label, or list all classes under classes"}
		}
	}
	return s, nil
}

// shown lists the first few of many words.
func shown(words []string) string {
	if len(words) > 10 {
		return list(words[:10]) + ", ..."
	}
	return list(words)
}
