// Package spelling finds the words that a mistyped one may have meant, for
// error messages about names in files.
package spelling

import (
	"slices"
	"strings"
)

// Near lists at most three of the known words that are close to word, nearest
// first and otherwise in the order given. Close means at most one slip in three
// letters, at least one and at most four; the difference of capitals and small
// letters counts as none. A word that is known is its own nearest.
func Near(word string, known []string) []string {
	type near struct {
		word  string
		slips int
	}
	var list []near
	typed := []rune(strings.ToLower(word))
	limit := max(1, min(4, len(typed)/3))
	for _, k := range known {
		meant := []rune(strings.ToLower(k))
		if d := len(meant) - len(typed); d > limit || -d > limit {
			continue
		}
		if n := slips(typed, meant); n <= limit && n < len(typed) {
			list = append(list, near{k, n})
		}
	}
	slices.SortStableFunc(list, func(a, b near) int { return a.slips - b.slips })
	var words []string
	for _, n := range list[:min(3, len(list))] {
		words = append(words, n.word)
	}
	return words
}

// slips is the smallest number of letters left out, put in, replaced or
// swapped with their neighbour that turns a into b, no letter being touched
// twice (F. J. Damerau, Commun. ACM 7, 171 (1964), in its restricted form).
func slips(a, b []rune) int {
	// Rows i−2, i−1 and i of the table of distances between beginnings.
	before, above, row := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := 1; i <= len(a); i++ {
		before, above, row = above, row, before
		row[0] = i
		for j := 1; j <= len(b); j++ {
			replaced := above[j-1]
			if a[i-1] != b[j-1] {
				replaced++
			}
			row[j] = min(above[j]+1, row[j-1]+1, replaced)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
	}
	return row[len(b)]
}
