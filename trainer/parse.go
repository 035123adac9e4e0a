package trainer

import (
	"fmt"
	"strings"
)

// maxElements bounds the elements of one example between two layers and of one
// parameter, so that a slip of the pen is an error and not a machine out of memory.
const maxElements = 1 << 28

// ParseLayers checks a network written as one text a layer and computes what
// follows from it: shapes, parameters, lengths of sums, work. input is the shape
// of one example: [features], [channels, length] or [channels, rows, columns]. A
// dense layer flattens what it is given. An error names the layer and the remedy.
func ParseLayers(texts []string, input []int) (Network, error) {
	if len(texts) == 0 {
		return Network{}, fmt.Errorf("the network has no layers; write at least \"dense CLASSES\"")
	}
	if err := checkShape(input); err != nil {
		return Network{}, fmt.Errorf("input shape %s: %w", shapeText(input), err)
	}
	n := Network{Input: append([]int(nil), input...)}
	shape := n.Input
	for i, text := range texts {
		spec, err := parseLayer(text, shape)
		if err != nil {
			return Network{}, fmt.Errorf("layer %d of %d, %q on an input of %s: %w", i+1, len(texts), text, shapeText(shape), err)
		}
		n.Layers = append(n.Layers, *spec)
		shape = spec.Out
	}
	if err := n.pairResiduals(); err != nil {
		return Network{}, err
	}
	return n, nil
}

// parseLayer checks one layer on the shape of one example below it.
func parseLayer(text string, in []int) (*Spec, error) {
	words := strings.Fields(text)
	if len(words) == 0 {
		return nil, fmt.Errorf("an empty text; known layers: %s", kindNames())
	}
	k := findKind(words[0])
	if k == nil {
		return nil, unknownWord("layer", words[0], kindList())
	}
	o, err := readOptions(k, words[1:])
	if err != nil {
		return nil, err
	}
	s := &Spec{Text: text, Kind: k.name, In: append([]int(nil), in...)}
	if err := k.parse(o, s); err != nil {
		return nil, err
	}
	if err := o.leftover(); err != nil {
		return nil, err
	}
	return s, checkSizes(s)
}

// checkSizes refuses outputs and parameters that no machine could hold.
func checkSizes(s *Spec) error {
	if err := checkShape(s.Out); err != nil {
		return fmt.Errorf("output of %s: %w", shapeText(s.Out), err)
	}
	for _, p := range s.Params {
		if err := checkShape(p.Shape); err != nil {
			return fmt.Errorf("%s of %s: %w", p.Name, shapeText(p.Shape), err)
		}
	}
	return nil
}

// checkShape refuses shapes that are empty or too large.
func checkShape(shape []int) error {
	if len(shape) == 0 || len(shape) > 4 {
		return fmt.Errorf("%d dimensions; one to three are known: [features], [channels, length], [channels, rows, columns]", len(shape))
	}
	n := 1
	for _, d := range shape {
		if d < 1 {
			return fmt.Errorf("a dimension of %d; every dimension must be at least 1", d)
		}
		if d > maxElements/n {
			return fmt.Errorf("more than %d values; use fewer channels or units, or a larger stride", maxElements)
		}
		n *= d
	}
	return nil
}

// shapeText prints a shape as people write it: 6x60.
func shapeText(shape []int) string {
	if len(shape) == 0 {
		return "no dimension"
	}
	parts := make([]string, len(shape))
	for i, d := range shape {
		parts[i] = fmt.Sprint(d)
	}
	return strings.Join(parts, "x")
}

// kindList are the known layer words in the order of the table.
func kindList() []string {
	names := make([]string, len(kinds))
	for i, k := range kinds {
		names[i] = k.name
	}
	return names
}

// LayerNames are the words that layers begin with, in the order of the table.
func LayerNames() []string { return kindList() }

func kindNames() string { return strings.Join(kindList(), ", ") }
