package si

import "strings"

// longestWord bounds what Suggest compares: longer words are no slips of the
// pen, and the comparison takes time as the product of the lengths.
const longestWord = 64

// Suggest returns the word of known that somebody who wrote word most likely
// meant, or "" when nothing is near. Distance counts insertions, deletions,
// replacements and exchanged neighbours (Damerau 1964, restricted form); a
// letter in the wrong case counts half. Up to a third of the letters may be
// wrong, at least one. Of equally near words the first of known is taken.
func Suggest(word string, known []string) string {
	a := []rune(strings.TrimSpace(word))
	if len(a) == 0 || len(word) > 4*longestWord || len(a) > longestWord {
		return ""
	}
	best, found := 2*max(1, len(a)/3)+1, ""
	for _, k := range known {
		b := []rune(k)
		if len(b) > longestWord || 2*max(len(a)-len(b), len(b)-len(a)) >= best {
			continue
		}
		d := distance(a, b)
		if strings.EqualFold(string(a), k) {
			d = min(d, 1) // only the case is wrong, however often
		}
		// A single letter changed into another single letter is no likeness.
		if d < best && d < 2*max(len(a), len(b)) {
			best, found = d, k
		}
	}
	return found
}

// distance is twice the edit distance of a and b.
func distance(a, b []rune) int {
	var rows [3][longestWord + 1]int
	before, above, here := &rows[0], &rows[1], &rows[2]
	for j := range len(b) + 1 {
		above[j] = 2 * j
	}
	for i := 1; i <= len(a); i++ {
		here[0] = 2 * i
		for j := 1; j <= len(b); j++ {
			cost := 2
			switch {
			case a[i-1] == b[j-1]:
				cost = 0
			case strings.EqualFold(string(a[i-1]), string(b[j-1])):
				cost = 1
			}
			d := min(above[j-1]+cost, above[j]+2, here[j-1]+2)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] && a[i-1] != b[j-1] {
				d = min(d, before[j-2]+2)
			}
			here[j] = d
		}
		before, above, here = above, here, before
	}
	return above[len(b)]
}
