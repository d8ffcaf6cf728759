package profiles

import "strings"

// Suggest returns the name nearest to one that is not there, by the number of
// letters to change, or "" where none comes near.
func (s *Set) Suggest(name string) string {
	wanted := []rune(strings.ToLower(name))
	best, least := "", max(1, len(wanted)/3)+1
	for _, n := range s.names {
		if d := editDistance(wanted, []rune(strings.ToLower(n))); d < least {
			best, least = n, d
		}
	}
	return best
}

// editDistance counts insertions, deletions and replacements (V. I. Levenshtein,
// 1966), row by row.
func editDistance(a, b []rune) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i, x := range a {
		corner := row[0]
		row[0] = i + 1
		for j, y := range b {
			replaced := corner
			if x != y {
				replaced++
			}
			corner = row[j+1]
			row[j+1] = min(replaced, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
