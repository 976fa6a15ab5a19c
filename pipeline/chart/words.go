package chart

import "fmt"

// numeral writes counts below a hundred as words, as the rules are named.
func numeral(n int) string {
	words := [...]string{"no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten",
		"eleven", "twelve", "thirteen", "fourteen", "fifteen", "sixteen", "seventeen", "eighteen", "nineteen"}
	tens := [...]string{"twenty", "thirty", "forty", "fifty", "sixty", "seventy", "eighty", "ninety"}
	switch {
	case n < 0 || n > 99:
		return fmt.Sprint(n)
	case n < len(words):
		return words[n]
	case n%10 == 0:
		return tens[n/10-2]
	}
	return tens[n/10-2] + "-" + words[n%10]
}

// plural writes a count with its noun.
func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

// side names a direction.
func side(sign float64) string {
	if sign < 0 {
		return "below"
	}
	return "above"
}
