package datasets

import "fmt"

// split says which training examples a file's sets take; see the package's rules.
type split struct {
	train           int // first n of what validation leaves; 0: all
	validation      int // last n, or the first n of every k-th; 0: none, or all of every k-th
	validationEvery int
}

func readSplit(r *reader) split {
	s := split{
		train:           r.count("train", 0, 1),
		validation:      r.count("validation", 0, 0),
		validationEvery: r.whole("validation_every", 0, 2, maxExamples),
	}
	return s
}

// check is for values that did not come through a reader.
func (s split) check() error {
	switch {
	case s.train < 0:
		return &OptionError{"train", fmt.Sprintf("%d is out of range", s.train), "choose 1 or more, or 0 for all"}
	case s.validation < 0:
		return &OptionError{"validation", fmt.Sprintf("%d is out of range", s.validation), "choose 0 or more"}
	case s.validationEvery < 0 || s.validationEvery == 1:
		return &OptionError{"validation_every", fmt.Sprintf("%d is out of range", s.validationEvery), "choose 2 or more, or 0 for none"}
	}
	return nil
}

// divide deals the numbers in all to the two sets, in ascending order.
func (s split) divide(all []int) (train, validation []int, err error) {
	switch {
	case s.validationEvery > 0:
		train, validation = everyNth(all, s.validationEvery)
		if validation, err = first("validation", validation, s.validation); err != nil {
			return nil, nil, err
		}
	case s.validation >= len(all):
		return nil, nil, &OptionError{"validation", fmt.Sprintf("%d examples taken off %d leave none to train on", s.validation, len(all)), "ask for fewer"}
	default:
		cut := len(all) - s.validation
		train, validation = all[:cut], all[cut:]
	}
	if len(train) == 0 {
		return nil, nil, &OptionError{"train", "no example is left to train on", "take fewer examples for validation and test"}
	}
	train, err = first("train", train, s.train)
	return train, validation, err
}

// everyNth takes numbers k, 2k, ... of all, counted from 1, out of it.
func everyNth(all []int, k int) (rest, taken []int) {
	for i, n := range all {
		if (i+1)%k == 0 {
			taken = append(taken, n)
		} else {
			rest = append(rest, n)
		}
	}
	return rest, taken
}

// first keeps n of all; 0 keeps them all.
func first(key string, all []int, n int) ([]int, error) {
	if n == 0 {
		return all, nil
	}
	if n > len(all) {
		return nil, &OptionError{key, fmt.Sprintf("%d examples are asked for, there are %d", n, len(all)), "ask for fewer, or leave the key out for all"}
	}
	return all[:n], nil
}

// counting returns 0 to n-1.
func counting(n int) []int {
	all := make([]int, n)
	for i := range all {
		all[i] = i
	}
	return all
}

// gather copies the rows of the given numbers, each per values long.
func gather[T any](values []T, rows []int, per int) []T {
	out := make([]T, 0, int(len(rows)*per))
	for _, row := range rows {
		out = append(out, values[int(row*per):][:per]...)
	}
	return out
}
