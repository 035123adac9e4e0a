package datasets

import (
	"fmt"
	"math"
)

// How inputs are scaled.
const (
	Standardise = "standardise" // (x - mean)/std of the training set
	UnitRange   = "unit"        // pixels over 255: 0 to 1
	AsIs        = "none"        // as the source gives them
)

// rawSet holds the unscaled examples of one set.
type rawSet struct {
	// at returns value i of [n, volume of the shape], row-major. Files of pixels
	// stay bytes this way.
	at     func(i int) float64
	labels []int32
	// targets of a regression, [n, outputs], in the source's units; labels is nil then.
	targets []float64
	// where says in words where example i comes from, for errors; nil is allowed.
	where func(i int) string
}

// size is the number of examples; outputs those of a regression, else 0.
func (s *rawSet) size(outputs int) int {
	if outputs > 0 {
		return len(s.targets) / outputs
	}
	return len(s.labels)
}

// slice reads values from memory.
func slice(values []float64) func(int) float64 { return func(i int) float64 { return values[i] } }

// examples are unscaled data, split.
type examples struct {
	shape                   []int
	classNames              []string
	targetNames             []string // of a regression
	train, validation, test rawSet
	featureNames            []string // nil where features have no names
}

// finish scales, wraps and seals. perFeature standardises each value of an
// example by statistics of its own, else one mean and deviation serve all.
func (e *examples) finish(scale, description string, perFeature bool) (*Data, error) {
	d := &Data{
		Shape: e.shape, Classes: len(e.classNames), ClassNames: e.classNames, TargetNames: e.targetNames,
		Description: description, Warnings: e.missingClasses(),
	}
	if e.train.size(len(e.targetNames)) == 0 {
		return nil, fmt.Errorf("the training set is empty; give it at least one example")
	}
	columns := 1
	if perFeature {
		columns = volume(e.shape)
	}
	var m *moments
	if scale == Standardise {
		m = newMoments(e.train.at, int(e.train.size(len(e.targetNames))*volume(e.shape)), columns)
		if j := m.notFinite(); j >= 0 {
			return nil, fmt.Errorf("%s: values are too large to standardise; use smaller units or scale = %q", e.feature(j, columns), AsIs)
		}
		d.Mean, d.Std = m.mean, m.std
		d.Warnings = append(d.Warnings, e.constants(m)...)
	}
	for _, part := range []struct {
		name string
		raw  rawSet
		set  *Set
	}{{"training", e.train, &d.Train}, {"validation", e.validation, &d.Validation}, {"test", e.test, &d.Test}} {
		values, err := e.scaled(part.name, part.raw, m)
		if err != nil {
			return nil, err
		}
		if e.targetNames == nil {
			*part.set = newSet(e.shape, values, part.raw.labels)
			continue
		}
		targets, err := e.narrow(part.name, part.raw)
		if err != nil {
			return nil, err
		}
		*part.set = newTargetSet(e.shape, values, len(e.targetNames), targets)
	}
	d.seal()
	return d, nil
}

// scaled returns the binary32 numbers nearest to the scaled values.
func (e *examples) scaled(name string, raw rawSet, m *moments) ([]float32, error) {
	per := volume(e.shape)
	out := make([]float32, int(raw.size(len(e.targetNames))*per))
	for i := range out {
		x := raw.at(i)
		if m != nil {
			x = m.apply(i, x)
		}
		out[i] = float32(x)
		if math.IsInf(float64(out[i]), 0) || out[i] != out[i] {
			return nil, fmt.Errorf("%s data, %s: value %d becomes %g after scaling, beyond binary32; correct or remove the outlier", name, raw.place(i/per), i%per+1, x)
		}
	}
	return out, nil
}

// narrow returns the binary32 numbers nearest to a regression's targets.
func (e *examples) narrow(name string, raw rawSet) ([]float32, error) {
	out, outputs := make([]float32, len(raw.targets)), len(e.targetNames)
	for i, x := range raw.targets {
		out[i] = float32(x)
		if math.IsInf(float64(out[i]), 0) || out[i] != out[i] {
			return nil, fmt.Errorf("%s data, %s: target %q is %g, beyond binary32; correct or remove the outlier", name, raw.place(i/outputs), e.targetNames[i%outputs], x)
		}
	}
	return out, nil
}

// place says where example i comes from.
func (s *rawSet) place(i int) string {
	if s.where != nil {
		return s.where(i)
	}
	return fmt.Sprintf("example %d", i)
}

// missingClasses warns of classes that a set lacks.
func (e *examples) missingClasses() (warnings []string) {
	for _, part := range []struct {
		name string
		raw  rawSet
	}{{"training", e.train}, {"validation", e.validation}, {"test", e.test}} {
		if len(part.raw.labels) == 0 {
			continue
		}
		seen := make([]bool, len(e.classNames))
		for _, label := range part.raw.labels {
			seen[label] = true
		}
		for label, ok := range seen {
			if !ok {
				warnings = append(warnings, fmt.Sprintf("the %s set has no example of class %q", part.name, e.classNames[label]))
			}
		}
	}
	return warnings
}

// constants warns of features that carry no information.
func (e *examples) constants(m *moments) (warnings []string) {
	for j, std := range m.std {
		if std != 0 {
			continue
		}
		warnings = append(warnings, e.feature(j, len(m.std))+" is constant in the training set; it becomes 0 in every example")
	}
	return warnings
}

// feature names column j of the statistics.
func (e *examples) feature(j, columns int) string {
	switch {
	case columns == 1:
		return "the input"
	case e.featureNames != nil:
		return fmt.Sprintf("feature %q", e.featureNames[j])
	}
	return fmt.Sprintf("feature %d", j+1)
}

// moments are mean and standard deviation of one or more columns.
type moments struct{ mean, std []float64 }

// newMoments runs over n values twice, in ascending order: value i belongs to
// column i mod columns. std is the root of the mean squared distance from the
// mean, 0 exactly where a column is constant (rounding of the mean apart) or its
// spread underflows.
func newMoments(at func(int) float64, n, columns int) *moments {
	m := &moments{make([]float64, columns), make([]float64, columns)}
	constant := make([]bool, columns)
	for j := range constant {
		constant[j] = true
	}
	for i, j := 0, 0; i < n; i++ {
		x := at(i)
		m.mean[j] += x
		constant[j] = constant[j] && x == at(j)
		if j++; j == columns {
			j = 0
		}
	}
	rows := float64(n / columns)
	for j := range m.mean {
		m.mean[j] /= rows
	}
	for i, j := 0, 0; i < n; i++ {
		d := at(i) - m.mean[j]
		m.std[j] += float64(d * d)
		if j++; j == columns {
			j = 0
		}
	}
	for j := range m.std {
		m.std[j] = math.Sqrt(m.std[j] / rows)
		if constant[j] {
			m.mean[j], m.std[j] = at(j), 0
		}
	}
	return m
}

// notFinite returns a column whose sums left binary64, or -1.
func (m *moments) notFinite() int {
	for j, std := range m.std {
		if math.IsInf(std, 0) || std != std {
			return j
		}
	}
	return -1
}

// apply standardises value i. A constant feature becomes 0 everywhere, in
// validation and test data too: what it would be worth there was never learnt.
func (m *moments) apply(i int, x float64) float64 {
	j := 0
	if len(m.mean) > 1 {
		j = i % len(m.mean)
	}
	if m.std[j] == 0 {
		return 0
	}
	return (x - m.mean[j]) / m.std[j]
}
