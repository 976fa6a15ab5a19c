package naming

import "fmt"

// CheckDigits lists the ways of computing a check digit that rules may name:
// "luhn" (ISO/IEC 7812-1), "mod10" (weights 3 and 1 from the right, as in
// article numbers), "mod11" (weights 2, 3, 4 ... from the right, digit
// completing the sum to a multiple of 11, X for ten) and "mod11-remainder"
// (same weights, the remainder itself).
func CheckDigits() []string { return []string{"luhn", "mod10", "mod11", "mod11-remainder"} }

// CheckDigit computes the check digit of the digits in s; other characters
// are passed over. The result is "0".."9" or "X"; "" for an unknown way or no
// digits.
func CheckDigit(way, s string) string {
	sum, n := 0, 0
	for i := len(s) - 1; i >= 0; i-- {
		if s[i] < '0' || s[i] > '9' {
			continue
		}
		d := int(s[i] - '0')
		switch way {
		case "luhn":
			if n%2 == 0 {
				d = d*2/10 + d*2%10
			}
		case "mod10":
			if n%2 == 0 {
				d *= 3
			}
		default:
			d *= n + 2
		}
		sum += d
		n++
	}
	if n == 0 {
		return ""
	}
	r := 0
	switch way {
	case "luhn", "mod10":
		r = (10 - sum%10) % 10
	case "mod11":
		r = (11 - sum%11) % 11
	case "mod11-remainder":
		r = sum % 11
	default:
		return ""
	}
	if r == 10 {
		return "X"
	}
	return fmt.Sprint(r)
}

func (c *compiled) readCheckDigit(g map[string]string, m *Match) *ValueError {
	if c.Rule.CheckDigit == "" {
		return nil
	}
	base := first(g["order"], g["set"])
	want := CheckDigit(c.Rule.CheckDigit, base)
	if g["check"] == want {
		return nil
	}
	return &ValueError{Group: "check", Found: g["check"],
		Expected: fmt.Sprintf("%s, the check digit of %s", want, base),
		Remedy:   "a digit of the number or the check digit is mistyped; compare with the order"}
}
