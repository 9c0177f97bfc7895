package quantity

import (
	"math"
	"strconv"
	"strings"
)

var printPrefixes = []struct {
	name  string
	power int
}{{"f", -15}, {"p", -12}, {"n", -9}, {"µ", -6}, {"m", -3}, {"", 0}, {"k", 3}, {"M", 6}, {"G", 9}, {"T", 12}}

// scaleFor picks the SI prefix that leaves one to three digits before the point.
func scaleFor(value float64, unit Unit) (string, float64) {
	if !unit.prefix || value == 0 || math.IsNaN(value) || math.IsInf(value, 0) {
		return "", 1
	}
	p := int(math.Floor(math.Log10(math.Abs(value))*(1+1e-15)+1e-9)/3+1000) - 1000 // floor division by 3
	if p < -5 {
		p = -5
	}
	if p > 4 {
		p = 4
	}
	return printPrefixes[p+5].name, math.Pow10(3 * p)
}

// Print writes a value with its unit and an SI prefix, with up to seven
// significant digits and no trailing zeros, so that Parse gives the value back.
func Print(value float64, unit Unit) string {
	prefix, factor := scaleFor(value, unit)
	return join(trimNumber(value/factor, 7), prefix, unit)
}

func join(number, prefix string, unit Unit) string {
	if unit.Symbol == One.Symbol {
		return number
	}
	return number + " " + prefix + unit.Symbol
}

func trimNumber(v float64, digits int) string {
	return strings.Replace(strconv.FormatFloat(v, 'g', digits, 64), "e+0", "e", 1)
}

// decimals is how many places after the point the uncertainty u earns: two
// significant digits of it, none below zero.
func decimals(u float64) int {
	if u <= 0 || math.IsNaN(u) || math.IsInf(u, 0) {
		return 3
	}
	d := 1 - int(math.Floor(math.Log10(u)))
	if d < 0 {
		return 0
	}
	if d > 9 {
		return 9
	}
	return d
}

// PrintTo writes a value with as many digits as its expanded uncertainty u earns
// (two significant digits of u), without u itself: "31.02 mA".
func PrintTo(value, u float64, unit Unit) string {
	if u <= 0 || math.IsNaN(u) || math.IsInf(u, 0) {
		return Print(value, unit)
	}
	prefix, factor := scaleFor(math.Max(math.Abs(value), u), unit)
	return join(strconv.FormatFloat(value/factor, 'f', decimals(u/factor), 64), prefix, unit)
}

// PrintWith writes a value and its expanded uncertainty with the same prefix:
// "31.02 mA ± 0.14 mA".
func PrintWith(value, u float64, unit Unit) string {
	if u <= 0 || math.IsNaN(u) || math.IsInf(u, 0) {
		return Print(value, unit)
	}
	prefix, factor := scaleFor(math.Max(math.Abs(value), u), unit)
	d := decimals(u / factor)
	return join(strconv.FormatFloat(value/factor, 'f', d, 64), prefix, unit) + " ± " +
		join(strconv.FormatFloat(u/factor, 'f', d, 64), prefix, unit)
}

// PrintExact writes a value with its unit and an SI prefix and all its digits, for files
// that a machine reads back.
func PrintExact(value float64, unit Unit) string {
	prefix, factor := scaleFor(value, unit)
	scaled := value / factor
	if factor < 1 { // a power of ten below one is not exact: multiply by its inverse, which is
		scaled = value * math.Round(1/factor)
	}
	return join(strconv.FormatFloat(scaled, 'g', -1, 64), prefix, unit)
}
