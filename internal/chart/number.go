package chart

import (
	"strconv"
	"strings"
)

// number writes a figure with a true minus sign.
func number(v float64, digits int) string {
	return strings.Replace(strconv.FormatFloat(v, 'f', digits, 64), "-", "−", 1)
}

// plain writes a round figure without zeros at its end.
func plain(v float64) string {
	return strings.Replace(strconv.FormatFloat(v, 'g', 4, 64), "-", "−", 1)
}
