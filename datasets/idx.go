package datasets

import (
	"fmt"
	"path/filepath"
	"strconv"
)

// IDX reads images and labels from IDX files of unsigned bytes, plain or gzip.
// Images of [n, height, width] become examples of shape [1, height, width] (one
// channel); [n, features] and [n, channel, height, width] keep theirs. Labels are
// classes counted from 0, named by their number.
type IDX struct {
	TrainImages, TrainLabels string // paths
	TestImages, TestLabels   string // paths; both empty: no test set

	Train           int // first n after validation was taken off; 0: all
	Validation      int // last n of the training file; with ValidationEvery first n of those
	ValidationEvery int // every k-th of the training file; 0: off its end
	Test            int // first n; 0: all
	Classes         int // 0: the largest training label + 1
	// Scale is UnitRange (or empty): pixels over 255; Standardise: these by mean and
	// deviation of all training pixels; AsIs: 0 to 255.
	Scale string

	loaded cache
}

func newIDX(r *reader) Source {
	s := &IDX{
		TrainImages: r.path("train_images", true), TrainLabels: r.path("train_labels", true),
		TestImages: r.path("test_images", false), TestLabels: r.path("test_labels", false),
	}
	part := readSplit(r)
	s.Train, s.Validation, s.ValidationEvery = part.train, part.validation, part.validationEvery
	s.Test = r.count("test", 0, 1)
	s.Classes = r.whole("classes", 0, 2, 256)
	s.Scale = r.word("scale", UnitRange, Standardise, AsIs)
	if err := s.checkPaths(); err != nil && len(r.faults) == 0 {
		r.faults = append(r.faults, err)
	}
	return s
}

// checkPaths finds files that lack their partner.
func (s *IDX) checkPaths() error {
	missing := func(key string) error {
		return &OptionError{key, "is missing", fmt.Sprintf("write %s = \"path of a file\"", key)}
	}
	switch {
	case s.TrainImages == "":
		return missing("train_images")
	case s.TrainLabels == "":
		return missing("train_labels")
	case s.TestImages == "" && s.TestLabels != "":
		return missing("test_images")
	case s.TestImages != "" && s.TestLabels == "":
		return missing("test_labels")
	case s.TestImages == "" && s.Test != 0:
		return &OptionError{"test", "there is no test file to take examples from", "give test_images and test_labels"}
	}
	return nil
}

func (s *IDX) check() error {
	if err := s.checkPaths(); err != nil {
		return err
	}
	switch s.scale() {
	case UnitRange, Standardise, AsIs:
	default:
		return &OptionError{"scale", "unknown word " + quoted(s.Scale), "known: " + list([]string{UnitRange, Standardise, AsIs})}
	}
	switch {
	case s.Test < 0:
		return &OptionError{"test", fmt.Sprintf("%d is out of range", s.Test), "choose 1 or more, or 0 for all"}
	case s.Classes < 0 || s.Classes == 1 || s.Classes > 256:
		return &OptionError{"classes", fmt.Sprintf("%d is out of range", s.Classes), "choose 2 to 256"}
	}
	return s.split().check()
}

func (s *IDX) scale() string { return orElse(s.Scale, UnitRange) }

func (s *IDX) split() split { return split{s.Train, s.Validation, s.ValidationEvery} }

// Canonical implements Source.
func (s *IDX) Canonical() string {
	return fmt.Sprintf("idx train=%d validation=%d validation_every=%d test=%d classes=%d scale=%s",
		s.Train, s.Validation, s.ValidationEvery, s.Test, s.Classes, s.scale())
}

// Facts implements Source. It reads the headers of the images and all labels.
func (s *IDX) Facts() (Facts, error) {
	if err := s.check(); err != nil {
		return Facts{}, err
	}
	p, err := s.assemble(headOnly)
	if err != nil {
		return Facts{}, err
	}
	return Facts{
		Shape: p.shape, ClassNames: p.classNames,
		Train: len(p.train), Validation: len(p.validation), Test: len(p.test),
		Description: p.description,
	}, nil
}

// Load implements Source.
func (s *IDX) Load(uint64) (*Data, error) {
	if err := s.check(); err != nil {
		return nil, err
	}
	return s.loaded.get(s.load)
}

func (s *IDX) load() (*Data, error) {
	p, err := s.assemble(readIDX)
	if err != nil {
		return nil, err
	}
	divisor := 255.0
	if s.scale() == AsIs {
		divisor = 1
	}
	e := &examples{
		shape: p.shape, classNames: p.classNames,
		train:      p.trainFile.pick(p.train, divisor),
		validation: p.trainFile.pick(p.validation, divisor),
		test:       p.testFile.pick(p.test, divisor),
	}
	return e.finish(s.scale(), p.description, false)
}

// idxPair is a file of images with its labels.
type idxPair struct {
	images idxFile
	labels string // path, for errors
	class  []byte
}

// idxParts are all files, and which examples go to which set.
type idxParts struct {
	trainFile, testFile     idxPair
	train, validation, test []int // numbers in their file
	shape                   []int
	classNames              []string
	description             string
}

// assemble reads labels, and images as far as the given function does, and checks
// that they fit each other.
func (s *IDX) assemble(read func(*input) (idxFile, error)) (p *idxParts, err error) {
	p = &idxParts{}
	if p.trainFile, err = readPair("train", s.TrainImages, s.TrainLabels, read); err != nil {
		return nil, err
	}
	train := p.trainFile.images
	if p.train, p.validation, err = s.split().divide(counting(train.dims[0])); err != nil {
		return nil, err
	}
	p.shape = train.exampleShape()
	if s.TestImages != "" {
		if err := s.addTest(p, read); err != nil {
			return nil, err
		}
	}
	if p.classNames, err = s.classes(p); err != nil {
		return nil, err
	}
	p.description = fmt.Sprintf("IDX file %s: %d training, %d validation, %d test examples of %s, %d classes",
		filepath.Base(s.TrainImages), len(p.train), len(p.validation), len(p.test), times(p.shape), len(p.classNames))
	return p, nil
}

// addTest reads the test files.
func (s *IDX) addTest(p *idxParts, read func(*input) (idxFile, error)) (err error) {
	if p.testFile, err = readPair("test", s.TestImages, s.TestLabels, read); err != nil {
		return err
	}
	test, train := p.testFile.images, p.trainFile.images
	if got, want := times(test.dims[1:]), times(train.dims[1:]); got != want {
		return &FileError{File: s.TestImages, Offset: 4, Reason: fmt.Sprintf("examples are %s, those of %s are %s", got, s.TrainImages, want), Remedy: "give test images of the same size"}
	}
	p.test, err = first("test", counting(test.dims[0]), s.Test)
	return err
}

// readPair reads both files of a set and compares their counts.
func readPair(set, imagesPath, labelsPath string, read func(*input) (idxFile, error)) (p idxPair, err error) {
	p.labels = labelsPath
	if p.images, err = openIDX(set+"_images", imagesPath, read); err != nil {
		return p, err
	}
	if len(p.images.dims) < 2 {
		return p, &FileError{File: imagesPath, Offset: 3, Reason: "the file has one dimension: it holds labels", Remedy: "give a file of images, which begins 00000803, as " + set + "_images"}
	}
	labels, err := openIDX(set+"_labels", labelsPath, readIDX)
	if err != nil {
		return p, err
	}
	if n := len(labels.dims); n != 1 {
		return p, &FileError{File: labelsPath, Offset: 3, Reason: fmt.Sprintf("the file has %d dimensions: it holds no labels", n), Remedy: "give a file of labels, which begins 00000801, as " + set + "_labels"}
	}
	if n, m := p.images.dims[0], labels.dims[0]; n != m {
		return p, &FileError{File: labelsPath, Offset: 4, Reason: fmt.Sprintf("%d labels, but %s has %d images", m, imagesPath, n), Remedy: "give the two files that belong together"}
	}
	p.class = labels.content
	return p, nil
}

// exampleShape puts a channel before [height, width].
func (h idxHeader) exampleShape() []int {
	if len(h.dims) == 3 {
		return []int{1, h.dims[1], h.dims[2]}
	}
	return append([]int(nil), h.dims[1:]...)
}

// classes counts the classes and finds labels beyond them, in any example of
// either file, used or not.
func (s *IDX) classes(p *idxParts) ([]string, error) {
	n := s.Classes
	if n == 0 {
		for _, c := range p.trainFile.class {
			n = max(n, int(c)+1)
		}
	}
	if n < 2 {
		return nil, &FileError{File: s.TrainLabels, Offset: -1, Reason: "all labels are 0: there is one class only", Remedy: "give data with two classes or more"}
	}
	for _, f := range []idxPair{p.trainFile, p.testFile} {
		for i, c := range f.class {
			if int(c) >= n {
				return nil, &FileError{File: f.labels, Offset: int64(8 + i), Reason: fmt.Sprintf("label %d of example %d is out of range: there are %d classes, 0 to %d", c, i+1, n, n-1), Remedy: "correct the label, or write classes = " + strconv.Itoa(int(c)+1)}
			}
		}
	}
	names := make([]string, n)
	for i := range names {
		names[i] = strconv.Itoa(i)
	}
	return names, nil
}

// pick copies the examples of the given numbers; pixels become value/divisor.
func (p *idxPair) pick(rows []int, divisor float64) rawSet {
	if len(rows) == 0 {
		return rawSet{}
	}
	var values [256]float64
	for i := range values {
		values[i] = float64(i) / divisor
	}
	pixels := gather(p.images.content, rows, p.images.per())
	s := rawSet{at: func(i int) float64 { return values[pixels[i]] }, labels: make([]int32, len(rows))}
	for i, row := range rows {
		s.labels[i] = int32(p.class[row])
	}
	return s
}
