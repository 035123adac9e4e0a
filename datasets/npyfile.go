package datasets

import (
	archive "archive/zip"
	"fmt"
	"io"
	"path/filepath"

	"ulpine/datasets/npy"
)

// NPY reads arrays: inputs [n, shape of one example...], and labels [n], whole
// numbers counted from 0, or targets [n] or [n, outputs] of a regression. Each is an
// NPY file, plain or gzip, or, where Archive is given, a member of that NPZ file.
// Inputs may be several arrays of as many examples: they are joined along the first
// axis of an example, as channels of signals and images (each then [n, channels, ...])
// or as features of tables (each [n, features]), in the order given.
// Validation examples come off the training ones by the package's rules.
type NPY struct {
	Archive                 string // path of an NPZ file; the others then are names in it
	TrainInputs             []string
	TrainTruths             string
	TestInputs              []string // both or none
	TestTruths              string
	Regression              bool // truths are targets, else labels
	ClassNames              []string
	Train, Validation, Test int
	ValidationEvery         int
	Scale                   string // Standardise (or empty): each value of an example by its own statistics; AsIs
	loaded                  cache
}

func newNPY(r *reader) Source {
	s := &NPY{Archive: r.path("archive", false)}
	read := func(key string, required bool) string {
		if s.Archive == "" {
			return r.path(key, required)
		}
		name := r.text(key, "")
		if name == "" && required {
			r.fail(key, "is missing", fmt.Sprintf("write %s = \"name in the archive\"", key))
		}
		return name
	}
	several := func(key string, required bool) []string {
		if _, isText := r.options.Values[key].(string); isText || r.options.Values[key] == nil {
			if name := read(key, required); name != "" {
				return []string{name}
			}
			return nil
		}
		if s.Archive != "" {
			return r.words(key)
		}
		return r.paths(key)
	}
	s.TrainInputs, s.TestInputs = several("train_inputs", true), several("test_inputs", false)
	labels, testLabels := read("train_labels", false), read("test_labels", false)
	targets, testTargets := read("train_targets", false), read("test_targets", false)
	s.ClassNames = r.words("classes")
	part := readSplit(r)
	s.Train, s.Validation, s.ValidationEvery = part.train, part.validation, part.validationEvery
	s.Test = r.count("test", 0, 1)
	s.Scale = r.word("scale", Standardise, AsIs)
	s.Regression = targets != ""
	s.TrainTruths, s.TestTruths = labels, testLabels
	unused := testTargets
	if s.Regression {
		s.TrainTruths, s.TestTruths, unused = targets, testTargets, labels+testLabels
	}
	switch {
	case len(r.faults) > 0:
	case s.TrainTruths == "":
		r.fail("train_labels", "is missing", "write train_labels, or train_targets for a regression")
	case unused != "":
		r.fail("train_targets", "labels and targets are given together", "keep labels for classes, or targets for a regression")
	case len(s.TrainInputs) == 0:
		r.fail("train_inputs", "the list is empty", "write train_inputs = [\"first.npy\", \"second.npy\"]")
	case (len(s.TestInputs) == 0) != (s.TestTruths == ""):
		r.fail("test_inputs", "test inputs and their labels or targets go together", "give both or neither")
	case s.Test > 0 && len(s.TestInputs) == 0:
		r.fail("test", "there are no test inputs", "give test_inputs")
	case s.Regression && s.ClassNames != nil:
		r.fail("classes", "a regression has none", "leave it out")
	case len(s.ClassNames) == 1 || len(s.ClassNames) > maxClasses || twice(s.ClassNames) != "":
		r.fail("classes", fmt.Sprintf("%d names, or one twice", len(s.ClassNames)), fmt.Sprintf("give 2 to %d different names", maxClasses))
	}
	return s
}

// Canonical implements Source.
func (s *NPY) Canonical() string {
	return fmt.Sprintf("npy regression=%t classes=%q train=%d validation=%d validation_every=%d test=%d test_set=%t scale=%s",
		s.Regression, s.ClassNames, s.Train, s.Validation, s.ValidationEvery, s.Test, len(s.TestInputs) > 0, orElse(s.Scale, Standardise))
}

// Facts implements Source. It reads the files.
func (s *NPY) Facts() (Facts, error) {
	d, err := s.Load(0)
	if err != nil {
		return Facts{}, err
	}
	return d.facts(), nil
}

// Load implements Source.
func (s *NPY) Load(uint64) (*Data, error) {
	part := split{s.Train, s.Validation, s.ValidationEvery}
	if err := part.check(); err != nil {
		return nil, err
	}
	return s.loaded.get(func() (*Data, error) { return s.load(part) })
}

func (s *NPY) load(part split) (*Data, error) {
	main, err := s.pair("train", s.TrainInputs, s.TrainTruths)
	if err != nil {
		return nil, err
	}
	e := &examples{shape: main.shape}
	if s.Regression {
		e.targetNames = outputNames(main.outputs)
	} else if e.classNames, err = main.names(s.ClassNames); err != nil {
		return nil, err
	}
	train, validation, err := part.divide(counting(main.n))
	if err != nil {
		return nil, err
	}
	if e.train, err = main.pick(train, e); err != nil {
		return nil, err
	}
	if e.validation, err = main.pick(validation, e); err != nil {
		return nil, err
	}
	tested := 0
	if len(s.TestInputs) > 0 {
		other, err := s.pair("test", s.TestInputs, s.TestTruths)
		if err != nil {
			return nil, err
		}
		if err := other.fits(main); err != nil {
			return nil, err
		}
		rows, err := first("test", counting(other.n), s.Test)
		if err != nil {
			return nil, err
		}
		tested = len(rows)
		if e.test, err = other.pick(rows, e); err != nil {
			return nil, err
		}
	}
	file := orElse(s.Archive, s.TrainInputs[0])
	return e.finish(orElse(s.Scale, Standardise), fmt.Sprintf("arrays of %s: %d training, %d validation, %d test examples", filepath.Base(file), len(train), len(validation), tested), true)
}

// array reads one array.
func (s *NPY) array(key, name string) (a *npy.Array, err error) {
	where := name
	if s.Archive != "" {
		where = s.Archive
		a, err = readMember(s.Archive, name)
	} else {
		var in *input
		if in, err = openInput(key, name); err == nil {
			defer in.close()
			a, err = npy.ReadNumbers(in, maxValues)
		}
	}
	if err != nil {
		if _, ours := err.(*FileError); ours {
			return nil, err
		}
		return nil, &FileError{File: where, Offset: -1, Reason: key + " cannot be read", Err: err, Remedy: "save it with NumPy, little-endian and in C order"}
	}
	for i, x := range a.Values {
		if x-x != 0 {
			return nil, &FileError{File: where, Offset: -1, Reason: fmt.Sprintf("%s: value %d is %g", key, i, x), Remedy: "remove the example or replace it by a number"}
		}
	}
	return a, nil
}

// readMember reads an array of an NPZ archive.
func readMember(file, name string) (*npy.Array, error) {
	in, err := openInput("archive", file)
	if err != nil {
		return nil, err
	}
	in.close()
	z, err := archive.OpenReader(file)
	if err != nil {
		return nil, &FileError{File: file, Offset: -1, Reason: "it is no NPZ archive", Err: err, Remedy: "check the path given as archive"}
	}
	defer z.Close()
	var names []string
	for _, f := range z.File {
		if f.Name == name+".npy" {
			return openMember(f)
		}
		names = append(names, f.Name)
	}
	return nil, &FileError{File: file, Offset: -1, Reason: fmt.Sprintf("it has no array %q", name), Remedy: "its members: " + shown(names)}
}

func openMember(f *archive.File) (*npy.Array, error) {
	var r io.ReadCloser
	r, err := f.Open()
	if err != nil {
		return nil, err
	}
	defer r.Close()
	return npy.ReadNumbers(r, maxValues)
}
