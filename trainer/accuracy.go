package trainer

import "ulpine/quant"

// Scores counts answers. The answer is the class of the largest output, the
// lowest index among equals; an example with a NaN among its outputs has no
// answer and is wrong.
type Scores struct {
	Examples uint64
	Right    uint64
	Ties     uint64 // answers whose output another class shares
	Classes  int
	// Confusion[t*Classes+c] counts examples of class t answered c.
	Confusion []uint64
	// Unanswered[t] counts examples of class t with a NaN among their outputs.
	Unanswered []uint64
}

func newScores(classes int) *Scores {
	return &Scores{Classes: classes, Confusion: make([]uint64, classes*classes), Unanswered: make([]uint64, classes)}
}

// Accuracy is the fraction of right answers, in binary64.
func (s *Scores) Accuracy() float64 { return float64(s.Right) / float64(s.Examples) }

// reset forgets all answers.
func (s *Scores) reset() {
	clear(s.Confusion)
	clear(s.Unanswered)
	s.Examples, s.Right, s.Ties = 0, 0, 0
}

// score adds the answers of a batch of outputs [len(labels), Classes].
func score[T quant.Element](s *Scores, y []T, labels []int32) {
	for n, label := range labels {
		s.Examples++
		best, tie := answer(y[n*s.Classes:][:s.Classes])
		if best < 0 {
			s.Unanswered[label]++
			continue
		}
		if tie {
			s.Ties++
		}
		if best == int(label) {
			s.Right++
		}
		s.Confusion[int(label)*s.Classes+best]++
	}
}

// answer is the lowest index of the largest output, and whether another output
// equals it; -1 if one is NaN.
func answer[T quant.Element](y []T) (best int, tie bool) {
	for c, v := range y {
		switch {
		case v != v:
			return -1, false
		case v > y[best]:
			best, tie = c, false
		case c > 0 && v == y[best]:
			tie = true
		}
	}
	return best, tie
}
