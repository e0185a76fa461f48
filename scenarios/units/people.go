package units

import (
	"strconv"
	"strings"
)

// Scientific prints a positive number for people as 1.23×10⁸, with that many decimals; a
// dash stands for what is neither positive nor 0.
func Scientific(v float64, decimals int) string {
	switch {
	case v == 0:
		return "0"
	case !(v > 0):
		return "–"
	}
	mantissa, exponent, _ := strings.Cut(strconv.FormatFloat(v, 'e', decimals, 64), "e")
	e, _ := strconv.Atoi(exponent)
	return mantissa + "×10" + Superscript(e)
}

// Superscript prints an exponent.
func Superscript(e int) string {
	return strings.Map(func(r rune) rune {
		if r == '-' {
			return '⁻'
		}
		return []rune("⁰¹²³⁴⁵⁶⁷⁸⁹")[r-'0']
	}, strconv.Itoa(e))
}
