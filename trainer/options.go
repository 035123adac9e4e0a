package trainer

import (
	"errors"
	"fmt"
	"slices"
	"sort"
	"strconv"
	"strings"
)

// options are the words behind a layer's name: key=value pairs and bare values.
type options struct {
	kind  *kind
	keyed map[string]string
	bare  []string
	asked []string // keys the layer knows, in the order it asks for them
}

// readOptions splits the words of one layer.
func readOptions(k *kind, words []string) (*options, error) {
	o := &options{kind: k, keyed: map[string]string{}}
	for _, w := range words {
		key, value, ok := strings.Cut(w, "=")
		if !ok {
			o.bare = append(o.bare, w)
			continue
		}
		if key == "" || value == "" {
			return nil, fmt.Errorf("%q is no option: write key=value without spaces, as in %q", w, k.usage)
		}
		if _, twice := o.keyed[key]; twice {
			return nil, fmt.Errorf("%s is given twice; keep one", key)
		}
		o.keyed[key] = value
	}
	return o, nil
}

// pair reads an option of one whole number, or of two joined by x (rows x
// columns) if both is set. fallback < 0 means that the option must be given.
func (o *options) pair(key string, least, fallback int, both bool) (rows, columns int, err error) {
	o.asked = append(o.asked, key)
	text, ok := o.keyed[key]
	if !ok {
		if fallback < 0 {
			return 0, 0, fmt.Errorf("%s is missing; write %q", key, o.kind.usage)
		}
		return fallback, fallback, nil
	}
	delete(o.keyed, key)
	parts := []string{text}
	if both {
		parts = strings.SplitN(text, "x", 2)
	}
	numbers := make([]int, len(parts))
	for i, part := range parts {
		if numbers[i], err = wholeNumber(key, part, least); err != nil {
			return 0, 0, err
		}
	}
	return numbers[0], numbers[len(numbers)-1], nil
}

// number reads an option of one whole number.
func (o *options) number(key string, least, fallback int) (int, error) {
	n, _, err := o.pair(key, least, fallback, false)
	return n, err
}

// word reads an option that is one of some words, the first where it is not given.
func (o *options) word(key string, known ...string) (string, error) {
	o.asked = append(o.asked, key)
	text, ok := o.keyed[key]
	if !ok {
		return known[0], nil
	}
	delete(o.keyed, key)
	if !slices.Contains(known, text) {
		return "", unknownWord(key, text, known)
	}
	return text, nil
}

// only reads the single bare value of a layer such as "dense 16".
func (o *options) only(what string, least int) (int, error) {
	if len(o.bare) == 0 {
		return 0, fmt.Errorf("the number of %s is missing; write %q", what, o.kind.usage)
	}
	n, err := wholeNumber(what, o.bare[0], least)
	o.bare = o.bare[1:]
	return n, err
}

// decimal reads an option of one decimal number, to its nearest binary32 number.
func (o *options) decimal(key string, fallback float64) (float64, error) {
	o.asked = append(o.asked, key)
	text, ok := o.keyed[key]
	if !ok {
		return single(fallback), nil
	}
	delete(o.keyed, key)
	return decimalNumber(key, text)
}

// onlyDecimal reads the single bare value of a layer such as "dropout 0.5".
func (o *options) onlyDecimal(what string) (float64, error) {
	if len(o.bare) == 0 {
		return 0, fmt.Errorf("the %s is missing; write %q", what, o.kind.usage)
	}
	text := o.bare[0]
	o.bare = o.bare[1:]
	return decimalNumber("the "+what, text)
}

// decimalNumber reads a finite number, to its nearest binary32 number.
func decimalNumber(what, text string) (float64, error) {
	x, err := strconv.ParseFloat(text, 64)
	if err != nil || x-x != 0 {
		return 0, fmt.Errorf("%s is %q, not a number", what, text)
	}
	return single(x), nil
}

// decimalText is the shortest decimal that a binary32 number is nearest to.
func decimalText(x float64) string { return strconv.FormatFloat(x, 'g', -1, 32) }

// leftover finds words nobody asked for.
func (o *options) leftover() error {
	if len(o.bare) > 0 {
		return fmt.Errorf("%q is not understood; write %q", o.bare[0], o.kind.usage)
	}
	if len(o.keyed) == 0 {
		return nil
	}
	unknown := make([]string, 0, len(o.keyed))
	for key := range o.keyed {
		unknown = append(unknown, key)
	}
	sort.Strings(unknown)
	if len(o.asked) == 0 {
		return fmt.Errorf("%s takes no option %s; write %q", o.kind.name, unknown[0], o.kind.usage)
	}
	return unknownWord("option", unknown[0], o.asked)
}

// wholeNumber reads a count.
func wholeNumber(what, text string, least int) (int, error) {
	n, err := strconv.Atoi(text)
	switch {
	case errors.Is(err, strconv.ErrRange) && !strings.HasPrefix(text, "-"), err == nil && n > maxElements:
		return 0, fmt.Errorf("%s is %s, too large; write at most %d", what, text, maxElements)
	case errors.Is(err, strconv.ErrRange), err == nil && n < least:
		return 0, fmt.Errorf("%s is %s; it must be at least %d, write %d or more", what, text, least, least)
	case err != nil:
		return 0, fmt.Errorf("%s is %q, not a whole number; write %d or more", what, text, least)
	}
	return n, nil
}

// unknownWord reports a word that is not in a list, with the nearest one if it
// looks like a slip of the pen.
func unknownWord(what, word string, known []string) error {
	best, distance := "", len(word)/2+1
	for _, k := range known {
		if d := editDistance(word, k); d < distance {
			best, distance = k, d
		}
	}
	list := strings.Join(known, ", ")
	if best == "" {
		return fmt.Errorf("unknown %s %q; known: %s", what, word, list)
	}
	return fmt.Errorf("unknown %s %q; did you mean %q? known: %s", what, word, best, list)
}

// editDistance is the number of inserted, deleted or replaced bytes between two
// words (V. I. Levenshtein 1966).
func editDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			cost := diagonal
			if a[i] != b[j] {
				cost++
			}
			diagonal = row[j+1]
			row[j+1] = min(cost, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
