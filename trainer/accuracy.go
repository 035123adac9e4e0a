package trainer

import (
	"math"

	"ulpine/quant"
)

// Scores counts answers. The answer is the class of the largest output, the
// lowest index among equals; an example with a NaN among its outputs has no
// answer and is wrong. In a regression Classes is 0 and only distances are summed.
type Scores struct {
	Examples uint64
	Right    uint64
	Ties     uint64 // answers whose output another class shares
	Classes  int
	// Confusion[t*Classes+c] counts examples of class t answered c.
	Confusion []uint64
	// Unanswered[t] counts examples of class t with a NaN among their outputs.
	Unanswered []uint64

	// Of evaluations: the alarm score, the class and the answer (-1: none) of every
	// example, in order.
	Alarm  []float64
	Truth  []int32
	Called []int32

	Outputs int     // of a regression
	Squares float64 // the squared distances, summed in binary64 in the order of examples and outputs
	// Of evaluations of a regression: outputs, rounded to binary32 where they are
	// wider, and targets, both [examples, outputs].
	Values, Targets []float32

	keep bool // keep what is said of every example
}

// newScores returns empty counts of a classification, or sums of a regression.
func newScores(outputs int, regression bool) *Scores {
	if regression {
		return &Scores{Outputs: outputs}
	}
	return &Scores{Classes: outputs, Confusion: make([]uint64, outputs*outputs), Unanswered: make([]uint64, outputs)}
}

// Accuracy is the fraction of right answers, in binary64; NaN in a regression.
func (s *Scores) Accuracy() float64 {
	if s.Classes == 0 {
		return math.NaN()
	}
	return float64(s.Right) / float64(s.Examples)
}

// RMSE is the root of the mean squared distance over examples and outputs, in
// binary64; NaN in a classification.
func (s *Scores) RMSE() float64 {
	if s.Outputs == 0 {
		return math.NaN()
	}
	return math.Sqrt(s.Squares / (float64(s.Examples) * float64(s.Outputs)))
}

// Recall is the fraction of the examples of a class that were answered rightly; NaN
// where there are none.
func (s *Scores) Recall(class int) float64 {
	all := s.Unanswered[class]
	for _, n := range s.Confusion[class*s.Classes:][:s.Classes] {
		all += n
	}
	return float64(s.Confusion[class*s.Classes+class]) / float64(all)
}

// reset forgets all answers.
func (s *Scores) reset() {
	clear(s.Confusion)
	clear(s.Unanswered)
	s.Examples, s.Right, s.Ties, s.Squares = 0, 0, 0, 0
	s.Alarm, s.Truth, s.Called = s.Alarm[:0], s.Truth[:0], s.Called[:0]
	s.Values, s.Targets = s.Values[:0], s.Targets[:0]
}

// score adds the outputs [examples, outputs] of a batch.
func score[T quant.Element](s *Scores, y []T, t truth) {
	if s.Classes == 0 {
		s.Squares = addSquares(s.Squares, y, t.values)
		s.Examples += uint64(len(y) / s.Outputs)
		if s.keep {
			for _, v := range y {
				s.Values = append(s.Values, float32(v))
			}
			s.Targets = append(s.Targets, t.values...)
		}
		return
	}
	for n, label := range t.labels {
		s.Examples++
		row := y[n*s.Classes:][:s.Classes]
		best, tie := answer(row)
		if s.keep {
			s.Alarm, s.Truth, s.Called = append(s.Alarm, alarmScore(row)), append(s.Truth, label), append(s.Called, int32(best))
		}
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
