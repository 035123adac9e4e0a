package plan

import (
	"slices"
	"strconv"
	"strings"
)

// nearest returns the known word with the fewest edits from word, and whether
// it is near enough to be worth suggesting: at most one edit in three letters.
// The first of equally near words wins.
func nearest(word string, known []string) (string, bool) {
	best, least := "", 1<<30
	for _, k := range known {
		if d := edits(strings.ToLower(word), strings.ToLower(k)); d < least {
			best, least = k, d
		}
	}
	return best, best != "" && least <= max(1, (max(len(word), len(best))+1)/3)
}

// suggest is the remedy for a word that is none of the known ones.
func suggest(word string, known []string) string {
	if best, ok := nearest(word, known); ok {
		return "did you mean " + strconv.Quote(best) + "?"
	}
	return "write one of " + listed(known)
}

// listed puts words in a row for a message, in order of the alphabet.
func listed(words []string) string {
	sorted := slices.Clone(words)
	slices.Sort(sorted)
	return strings.Join(sorted, ", ")
}

// edits counts the insertions, deletions, substitutions and swaps of
// neighbouring letters that turn a into b (the optimal string alignment form of
// Damerau and Levenshtein's distance).
func edits(a, b string) int {
	x, y := []rune(a), []rune(b)
	rows := [3][]int{make([]int, len(y)+1), make([]int, len(y)+1), make([]int, len(y)+1)}
	before, above, row := rows[0], rows[1], rows[2]
	for j := range above {
		above[j] = j
	}
	for i := 1; i <= len(x); i++ {
		row[0] = i
		for j := 1; j <= len(y); j++ {
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			row[j] = min(above[j]+1, row[j-1]+1, above[j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, above, row = above, row, before
	}
	return above[len(y)]
}
