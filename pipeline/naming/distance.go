package naming

import "strings"

// Distance is the least number of characters to insert, delete, replace or
// exchange with their neighbour that turns a into b (optimal string
// alignment).
func Distance(a, b string) int {
	x, y := []rune(a), []rune(b)
	prev2 := make([]int, len(y)+1)
	prev := make([]int, len(y)+1)
	row := make([]int, len(y)+1)
	for j := range prev {
		prev[j] = j
	}
	for i := 1; i <= len(x); i++ {
		row[0] = i
		for j := 1; j <= len(y); j++ {
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			row[j] = min(prev[j]+1, row[j-1]+1, prev[j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				row[j] = min(row[j], prev2[j-2]+1)
			}
		}
		prev2, prev, row = prev, row, prev2
	}
	return prev[len(y)]
}

// glyphs are characters taken for each other by eye or by hand.
const glyphs = "1lI|i 0OoQD 5S 8B 2Z 6G uv -–— _- .,"

// lookAlike reports whether two characters are easily taken for each other.
func lookAlike(a, b rune) bool {
	if a == b {
		return true
	}
	for set := range strings.SplitSeq(glyphs, " ") {
		if strings.ContainsRune(set, a) && strings.ContainsRune(set, b) {
			return true
		}
	}
	return false
}

// alikes lists the characters that a may stand for.
func alikes(a rune) []rune {
	var out []rune
	for set := range strings.SplitSeq(glyphs, " ") {
		if strings.ContainsRune(set, a) {
			for _, r := range set {
				if r != a {
					out = append(out, r)
				}
			}
		}
	}
	return out
}
