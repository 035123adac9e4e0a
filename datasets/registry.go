package datasets

// Source yields data. Its methods may be called from several goroutines.
type Source interface {
	// Facts states shape, classes and sizes, and checks the options. It reads
	// files only as far as needed, so that Load may still find faults in them.
	Facts() (Facts, error)
	// Load yields the data of the replicate with the given seed; for files it is
	// the same for every seed.
	Load(replicateSeed uint64) (*Data, error)
	// Canonical spells out, in one line, every option that determines the
	// examples, defaults filled in and paths left out: what files hold is in
	// Data.Hash.
	Canonical() string
}

// kind is one row of the table of data sets.
type kind struct {
	name    string
	summary string
	make    func(*reader) Source
}

// table lists the data sets a plan can name.
var table = []kind{
	{"pump-vibration", "accelerometer windows of a pump in five states; invented data", newPumpVibration},
	{"noisy-regression", "a linear regression with a known noise floor; invented data", newRegression},
	{"teacher", "a random network gives the targets; invented data", newTeacher},
	{"window-energy", "the mean square of windows of 4,096 samples; invented data", newEnergy},
	{"sensor-drift", "sensors whose gains and offsets drift, fresh or drifted; invented data", newDrift},
	{"idx", "images and labels in IDX files, plain or gzip", newIDX},
	{"npy", "inputs with labels or targets in NPY files or an NPZ archive", newNPY},
	{"csv", "a table of numbers with a label column, plain or gzip", newCSV},
}

// Options are the keys of a task as written, apart from the data set's name.
type Options struct {
	// Values are whole numbers (int64 or int), strings, booleans and lists of
	// strings ([]any or []string): what a decoder of TOML yields.
	Values map[string]any
	Folder string // where relative paths of files start; "" is the working directory
}

// New returns the source that a name and options describe. Its error is a
// *OptionError or several joined, each naming a key; of the name itself, the key
// "data".
func New(name string, o Options) (Source, error) {
	k, err := find(name)
	if err != nil {
		return nil, err
	}
	r := &reader{options: o}
	source := k.make(r)
	if err := r.finish(k.name); err != nil {
		return nil, err
	}
	return source, nil
}

// Names lists the data sets there are.
func Names() []string {
	names := make([]string, len(table))
	for i, k := range table {
		names[i] = k.name
	}
	return names
}

// Summary is one line about a data set, empty for an unknown name.
func Summary(name string) string {
	for _, k := range table {
		if k.name == name {
			return k.summary
		}
	}
	return ""
}

// Keys lists the options of a data set in the order of its documentation.
func Keys(name string) ([]string, error) {
	k, err := find(name)
	if err != nil {
		return nil, err
	}
	var r reader
	k.make(&r)
	return r.asked, nil
}

func find(name string) (*kind, error) {
	for i := range table {
		if table[i].name == name {
			return &table[i], nil
		}
	}
	return nil, &OptionError{"data", "unknown data set " + quoted(name), "known: " + list(Names())}
}
