package study

import (
	"strings"
	"unicode/utf8"
)

// nearest returns the name of known that takes the fewest edits to reach,
// letter case counting less than any edit; the first of equals. Empty where
// known is empty.
func nearest(name string, known []string) string {
	best, bestCost := "", -1
	folded := strings.ToLower(name)
	length := utf8.RuneCountInString(folded)
	for _, k := range known {
		// Twice the edits, plus one where only the case differs somewhere.
		gap := 2 * (utf8.RuneCountInString(k) - length)
		if bestCost >= 0 && max(gap, -gap) >= bestCost {
			continue // at least so many insertions: cannot be nearer
		}
		cost := 2 * edits(folded, strings.ToLower(k))
		if cost == 0 && k != name {
			cost = 1
		}
		if bestCost < 0 || cost < bestCost {
			best, bestCost = k, cost
		}
	}
	return best
}

// near is nearest, empty where even that is another word: it takes more edits
// than half of the name's letters, and neither name is a part of the other.
func near(name string, known []string) string {
	best := nearest(name, known)
	a, b := strings.ToLower(name), strings.ToLower(best)
	letters := utf8.RuneCountInString(a)
	const part = 3 // letters of a name that say something in a longer one
	within := min(len(a), len(b)) >= part && (strings.Contains(a, b) || strings.Contains(b, a))
	if best == "" || !within && edits(a, b) > (letters+1)/2 {
		return ""
	}
	return best
}

// NearHint names the column that was perhaps meant, as the end of a sentence;
// empty where none is near.
func NearHint(name string, columns []string) string {
	if best := near(name, columns); best != "" {
		return "; the nearest is " + quoted(best)
	}
	return ""
}

// edits is the number of insertions, deletions, replacements and swaps of
// neighbours that turn a into b, no part edited twice (the restricted
// distance of Damerau 1964, CACM 7:171-176, by the recurrence of Wagner and
// Fischer 1974, JACM 21:168-173).
func edits(a, b string) int {
	x, y := []rune(a), []rune(b)
	before := make([]int, len(y)+1) // row i-2
	above := make([]int, len(y)+1)  // row i-1
	row := make([]int, len(y)+1)
	for j := range above {
		above[j] = j
	}
	for i := 1; i <= len(x); i++ {
		row[0] = i
		for j := 1; j <= len(y); j++ {
			replaced := above[j-1]
			if x[i-1] != y[j-1] {
				replaced++
			}
			row[j] = min(replaced, above[j]+1, row[j-1]+1)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, above, row = above, row, before
	}
	return above[len(y)]
}
