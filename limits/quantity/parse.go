package quantity

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode"
)

// A WrongUnitError says that a text was read but is another kind of quantity, or
// none, than was wanted.
type WrongUnitError struct {
	Text string // what was written
	What string // what is wrong with it
	Want Unit   // what was expected
}

func (e *WrongUnitError) Error() string {
	return fmt.Sprintf("%q %s: write a %s, such as %s", e.Text, e.What, e.Want.Name, e.Want.Example)
}

var prefixes = map[string]float64{
	"f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "µ": 1e-6, "μ": 1e-6, "m": 1e-3, "c": 1e-2,
	"": 1, "k": 1e3, "M": 1e6, "G": 1e9, "T": 1e12,
}

// spellings maps what may stand after the number (without prefix) to the unit and
// the factor to its SI value. Spellings that take a prefix are in prefixed.
var prefixed = map[string]Unit{
	"V": Volt, "A": Ampere, "Hz": Hertz, "s": Second, "m": Metre,
	"Ω": Ohm, "\u2126": Ohm, "ohm": Ohm, "Ohm": Ohm,
	"V/√Hz": VoltPerRootHz, "V/sqrt(Hz)": VoltPerRootHz, "V/rtHz": VoltPerRootHz,
	"m/V": MetrePerVolt, "m/s": MetrePerSecond, "m/s²": MetrePerSecond2, "m/s^2": MetrePerSecond2,
}

type fixedUnit struct {
	unit   Unit
	factor float64
}

var fixed = map[string]fixedUnit{
	"%": {One, 0.01}, "": {One, 1}, "ppm": {One, 1e-6},
	"1/V": {PerVoltUnit, 1}, "%/V": {PerVoltUnit, 0.01},
	"dB": {DecibelUnit, 1}, "°C": {Celsius, 1}, "degC": {Celsius, 1},
	"rad": {RadianUnit, 1}, "°": {RadianUnit, math.Pi / 180}, "deg": {RadianUnit, math.Pi / 180},
	"min": {Second, 60}, "h": {Second, 3600}, "d": {Second, 86400},
}

// Parse reads a number with its unit, such as "31.5 mA" or "0.4 uV/sqrt(Hz)", and
// gives its value in the SI unit. A text of another dimension, without a unit where
// one is needed, or not finite gives a *WrongUnitError.
func Parse(text string, want Unit) (float64, error) {
	value, unit, err := parseAny(text, want)
	if err != nil {
		return 0, err
	}
	if unit.Symbol != want.Symbol {
		if unit.Symbol == One.Symbol {
			return 0, &WrongUnitError{text, "has no unit", want}
		}
		return 0, &WrongUnitError{text, "is a " + unit.Name, want}
	}
	return value, nil
}

// ParseAs reads a quantity of the type T, see Parse.
func ParseAs[T ~float64](text string) (T, error) {
	v, err := Parse(text, UnitOf[T]())
	return T(v), err
}

func parseAny(text string, want Unit) (float64, Unit, error) {
	s := strings.TrimSpace(text)
	end := numberEnd(s)
	number, err := strconv.ParseFloat(strings.ReplaceAll(s[:end], "−", "-"), 64)
	if err != nil || math.IsInf(number, 0) || math.IsNaN(number) {
		return 0, Unit{}, &WrongUnitError{text, "does not start with a number", want}
	}
	rest := strings.TrimSpace(s[end:])
	if f, ok := fixed[rest]; ok {
		return number * f.factor, f.unit, nil
	}
	if u, ok := prefixed[rest]; ok {
		return number, u, nil
	}
	for p, factor := range prefixes {
		if p == "" || !strings.HasPrefix(rest, p) {
			continue
		}
		if u, ok := prefixed[strings.TrimPrefix(rest, p)]; ok {
			return scale(number, factor), u, nil
		}
	}
	return 0, Unit{}, &WrongUnitError{text, fmt.Sprintf("has an unknown unit %q", rest), want}
}

// scale multiplies by a power of ten; dividing where the power is negative keeps
// 31.5 mA the nearest float64 to 0.0315, so that printing gives back what was read.
func scale(number, factor float64) float64 {
	if factor < 1 {
		return number / math.Round(1/factor)
	}
	return number * factor
}

// numberEnd is the length of the leading decimal number, with sign and exponent.
func numberEnd(s string) int {
	i := 0
	runes := []rune(s)
	isDigit := func(k int) bool { return k < len(runes) && unicode.IsDigit(runes[k]) && runes[k] < 128 }
	if i < len(runes) && (runes[i] == '+' || runes[i] == '-' || runes[i] == '−') {
		i++
	}
	for isDigit(i) || (i < len(runes) && runes[i] == '.') {
		i++
	}
	if i < len(runes) && (runes[i] == 'e' || runes[i] == 'E') {
		k := i + 1
		if k < len(runes) && (runes[k] == '+' || runes[k] == '-') {
			k++
		}
		if isDigit(k) {
			for isDigit(k) {
				k++
			}
			i = k
		}
	}
	return len(string(runes[:i]))
}

// Detect tells the unit a text is written in; a plain number where none is known.
func Detect(text string) Unit {
	if _, u, err := parseAny(text, One); err == nil {
		return u
	}
	return One
}
