package tables

import (
	"fmt"
	"sort"
	"strings"
)

// Nearest returns the name closest to the one that was written, by the number of
// letters to change, and false where none comes near.
func Nearest(written string, names []string) (string, bool) {
	w := strings.ToLower(written)
	if len(w) > 200 {
		return "", false
	}
	limit := max(1, (len([]rune(w))+1)/3)
	best, at := limit+1, ""
	for _, n := range names {
		if d := changes(w, strings.ToLower(n), best); d < best || (d == best && at != "" && n < at) {
			best, at = d, n
		}
	}
	return at, at != ""
}

// Hint returns the nearest name as the end of a fault's text, or a short list of
// what there is, or nothing.
func Hint(written string, names []string) string {
	if n, ok := Nearest(written, names); ok {
		return fmt.Sprintf("; did you mean %q?", n)
	}
	if len(names) > 0 && len(names) <= 12 {
		sorted := append([]string(nil), names...)
		sort.Strings(sorted)
		return "; there are: " + strings.Join(sorted, ", ")
	}
	return ""
}

// changes is the number of letters to replace, add, leave out or exchange with their
// neighbour (Damerau's distance without overlaps), or something above limit where it
// exceeds it.
func changes(a, b string, limit int) int {
	x, y := []rune(a), []rune(b)
	if d := len(x) - len(y); d > limit || -d > limit {
		return limit + 1
	}
	before, last, row := make([]int, len(y)+1), make([]int, len(y)+1), make([]int, len(y)+1)
	for j := range last {
		last[j] = j
	}
	for i := range x {
		row[0] = i + 1
		for j := range y {
			cost := 1
			if x[i] == y[j] {
				cost = 0
			}
			row[j+1] = min(last[j]+cost, row[j]+1, last[j+1]+1)
			if i > 0 && j > 0 && x[i] == y[j-1] && x[i-1] == y[j] {
				row[j+1] = min(row[j+1], before[j-1]+1)
			}
		}
		before, last, row = last, row, before
	}
	return last[len(y)]
}
