package plan

import (
	"fmt"
	"strings"

	"ulpine/trainer"
)

// readAugment reads what is done to training examples.
func (r *reader) readAugment(n *node) (a trainer.Augment) {
	if n.table == nil {
		r.wrongType(n, "a table", "augment = { shift = 2, noise = 0.05 }")
		return a
	}
	r.known(n, "shift", "noise")
	a.Shift = int(r.whole(n, "shift", 0, 0, maxCount))
	a.Noise = r.number(n, "noise", 0)
	if at := n.table["noise"]; at != nil && a.Noise != 0 && !positive32(a.Noise) {
		r.fail(at.errorf("write a standard deviation of 0 or more, as 0.05", "a noise of %g is out of range", a.Noise))
		a.Noise = 0
	}
	return a
}

// checkAugment holds an augmentation to the shape of the examples.
func (r *reader) checkAugment(n *node, t *trainer.Training, task *Task) {
	if task.Source == nil {
		return
	}
	at := n.table["augment"]
	if at == nil {
		at = n
	} else if shift := at.table["shift"]; shift != nil {
		at = shift
	}
	if err := t.Augment.Check(task.Shape); err != nil {
		reason, remedy, found := strings.Cut(strings.TrimPrefix(err.Error(), "augment: "), "; ")
		if !found {
			remedy = "correct it"
		}
		r.fail(at.errorf(remedy, "%s", reason))
	}
}

// DescribeAugment is an augmentation in words.
func DescribeAugment(a trainer.Augment) string {
	var parts []string
	if a.Shift != 0 {
		parts = append(parts, fmt.Sprintf("shifts of up to %d", a.Shift))
	}
	if a.Noise != 0 {
		parts = append(parts, fmt.Sprintf("noise of %g", float32(a.Noise)))
	}
	return strings.Join(parts, " and ")
}
