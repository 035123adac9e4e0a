package quant

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
)

// blockNames are the formats that OCP MX 1.0 names, section 5 (second hand).
var blockNames = []struct{ name, element string }{
	{"MXFP8", "E4M3"}, {"MXFP8", "E5M2"}, {"MXFP6", "E3M2"}, {"MXFP6", "E2M3"}, {"MXFP4", "E2M1"}, {"MXINT8", "Q2.6"},
}

// String returns the canonical name: a standard one, "MXFP8(E4M3)", "MXFP4(block=16,
// rule=up)", where element and scales are standard, else
// "block(E2M1,block=16,scale=E4M3,rule=nearest,tensor=binary32)".
func (b Block) String() string {
	s := b.spec
	element := s.Element.String()
	head, inside := "block", []string{element}
	if s.Scale == (PowerScale{}) && !s.Tensor {
		for _, k := range blockNames {
			if k.element == element {
				head = k.name
			}
		}
	}
	if head == "MXFP4" || head == "MXINT8" {
		inside = nil
	}
	if s.Size != standardBlock {
		inside = append(inside, fmt.Sprintf("block=%d", s.Size))
	}
	if s.Scale != (PowerScale{}) {
		inside = append(inside, "scale="+s.Scale.String())
	}
	if s.Rule != ScaleFloor {
		inside = append(inside, "rule="+s.Rule.String())
	}
	if s.Tensor {
		inside = append(inside, "tensor=binary32")
	}
	if len(inside) == 0 {
		return head
	}
	return head + "(" + strings.Join(inside, ",") + ")"
}

var blockName = regexp.MustCompile(`^(?i)(block|MXFP[468]|MXINT8)$`)

// parseBlock reads what Block.String writes; MXFP8 alone has E4M3, MXFP6 E3M2.
func parseBlock(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	if !blockName.MatchString(head) {
		return nil, false, nil
	}
	var s BlockSpec
	if err == nil {
		s, err = readBlock(head, &o)
	}
	if err == nil {
		err = o.rest("blocks have an element format, block=32, scale=E8M0, rule=floor, tensor=binary32")
	}
	var b Block
	if err == nil {
		b, err = NewBlock(s)
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return b, true, nil
}

// readBlock reads element and options.
func readBlock(head string, o *options) (s BlockSpec, err error) {
	if s.Element, err = blockElement(head, o); err != nil {
		return s, err
	}
	if text, ok := o.take("block"); ok {
		if s.Size, err = strconv.Atoi(text); err != nil || s.Size < 1 {
			return s, fmt.Errorf("block %q: want the number of its elements", text)
		}
	}
	if text, ok := o.take("scale"); ok {
		if s.Scale, err = ParseFormat(text); err != nil {
			return s, err
		}
	}
	if text, ok := o.take("rule"); ok {
		rule, err := lookup(ruleWords, text, "rule of block scales")
		if err != nil {
			return s, err
		}
		s.Rule = ScaleRule(rule)
	}
	if text, ok := o.take("tensor"); ok {
		f, err := ParseFormat(text)
		if err != nil || f != Binary32 {
			return s, fmt.Errorf("tensor %q: the scale of a tensor is a binary32 number", text)
		}
		s.Tensor = true
	}
	return s, nil
}

// blockElement reads the element format, or finds that of a standard name.
func blockElement(head string, o *options) (Format, error) {
	text, given := o.take("")
	if strings.EqualFold(head, "block") {
		if !given {
			return nil, fmt.Errorf("name the element format, as in block(E2M1,block=16)")
		}
		return ParseFormat(text)
	}
	var known []string
	for _, k := range blockNames {
		if strings.EqualFold(head, k.name) {
			if !given || strings.EqualFold(text, k.element) {
				return ParseFormat(k.element)
			}
			known = append(known, k.element)
		}
	}
	return nil, fmt.Errorf("element %q: %s has %s; write block(%s) for another", text, head, strings.Join(known, " or "), text)
}
