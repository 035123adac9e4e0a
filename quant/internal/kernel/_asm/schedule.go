package main

import "sort"

// A chain is the work of one accumulator in one term: its operations in order,
// each depending on the one before. The first is free of dependencies (it loads
// operands) and costs no arithmetic.
type chain []func()

// A schedule overlaps the chains of a tile and of neighbouring terms, so that
// an operation is issued when its operand is about to be ready. Without it the
// processor's schedulers fill with waiting operations: 3.2 cycles for eight
// both-rounded multiply-adds on Zen 5 instead of 2.8.
//
// Chain number c starts in slot c*n (n arithmetic operations a chain), and its
// operation s has slot c*n + s*spacing. Slots beyond the end of a term wrap into
// the next term's: late operations, run before or among those of that term.
type schedule struct {
	now, late []slotted
}

type slotted struct {
	slot int
	emit func()
}

// pipeline builds the schedule. It returns false where the spacing would let a
// chain outlive the term after its own, or one of its first operations, the heads
// that read the operands of the term, fall into the next.
func pipeline(chains []chain, heads, spacing int) (schedule, bool) {
	var s schedule
	n := len(chains[0]) - 1
	term := n * len(chains)
	if (heads-1)*spacing >= n {
		return s, false
	}
	for c, operations := range chains {
		for i, emit := range operations {
			slot := c*n + max(i-1, 0)*spacing
			switch {
			case max(i-1, 0)*spacing >= term:
				return s, false
			case slot < term:
				s.now = append(s.now, slotted{slot, emit})
			default:
				s.late = append(s.late, slotted{slot - term, emit})
			}
		}
	}
	return s, true
}

// first runs a term's own operations, both the late ones of the term before
// with them, last the late ones alone.
func (s schedule) first() { run(s.now) }
func (s schedule) both()  { run(append(append([]slotted{}, s.late...), s.now...)) }
func (s schedule) last()  { run(s.late) }

func run(operations []slotted) {
	sort.SliceStable(operations, func(i, j int) bool { return operations[i].slot < operations[j].slot })
	for _, o := range operations {
		o.emit()
	}
}
