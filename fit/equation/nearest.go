package equation

import (
	"slices"
	"strings"
	"unicode/utf8"
)

const (
	maxNearest    = 3   // names offered
	maxNearLength = 200 // signs of a word that is still compared sign by sign
)

// Nearest returns at most three of among that resemble word, the most alike first and in the order of among where
// they are alike. First come those equal but for case; then those at an edit distance (insert, delete, replace,
// swap two neighbors; case is ignored) of at most one third of the longer word, and at least 1. A name equal to
// word itself is left out. The result is nil when nothing is near. The rule of one third is common practice, no source.
// Cost is the product of the lengths for each name whose length is near.
//
// Source of the distance: the optimal string alignment form of Damerau (1964), Communications of the ACM 7(3), 171-176.
func Nearest(word string, among []string) []string {
	type near struct {
		name     string
		distance int
	}
	var found []near
	lower := []rune(strings.ToLower(word))
	for _, name := range among {
		if name == word || slices.ContainsFunc(found, func(n near) bool { return n.name == name }) {
			continue
		}
		if strings.EqualFold(name, word) {
			found = append(found, near{name, 0})
			continue
		}
		length := utf8.RuneCountInString(name)
		limit := max(1, max(len(lower), length)/3)
		if len(lower) < 2 || len(lower) > maxNearLength || length > len(lower)+limit || length < len(lower)-limit {
			continue
		}
		if d := editDistance(lower, []rune(strings.ToLower(name))); d <= limit {
			found = append(found, near{name, d})
		}
	}
	slices.SortStableFunc(found, func(a, b near) int { return a.distance - b.distance })
	var names []string
	for _, n := range found[:min(len(found), maxNearest)] {
		names = append(names, n.name)
	}
	return names
}

// editDistance is the least number of insertions, deletions, replacements and swaps of neighbors from a to b.
func editDistance(a, b []rune) int {
	before := make([]int, len(b)+1)
	last := make([]int, len(b)+1)
	row := make([]int, len(b)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			step := 1
			if a[i-1] == b[j-1] {
				step = 0
			}
			row[j] = min(last[j-1]+step, last[j]+1, row[j-1]+1)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last, row = last, row, before
	}
	return last[len(b)]
}
