package calibrate

import "math"

// plausibleWithin is how far a result may be from what is expected before it is asked about,
// and how near to a known mistake's factor it must be to be called one.
const (
	plausibleWithin = 0.12
	mistakeWithin   = 0.04
)

// mistakes are the factors by which a voltmeter is usually misread (crest factor √2 and form
// factor π/(2√2) of the sine).
var mistakes = []struct {
	factor       float64
	what, action string
}{
	{math.Sqrt2, "√2 times what is expected: the meter seems to show the peak", "set it to the effective value (RMS) and start again"},
	{1 / math.Sqrt2, "1/√2 of what is expected: a peak seems to have been taken for an effective value twice, or half the amplitude entered", "read the effective value (RMS) and start again"},
	{2 * math.Sqrt2 / math.Pi, "0.90 of what is expected: the meter seems to show the rectified mean", "use a meter of true effective value (RMS), or multiply by 1.111, and start again"},
	{10, "ten times what is expected: the reading seems to be of another range", "check the decimal point and the meter's range and start again"},
	{0.1, "a tenth of what is expected: the reading seems to be of another range", "check the decimal point and the meter's range and start again"},
	{1000, "a thousand times what is expected: millivolts seem to have been entered as volts", "enter the reading with its unit, such as 853 mV"},
	{0.001, "a thousandth of what is expected: volts seem to have been entered as millivolts", "enter the reading with its unit, such as 0.853 V"},
	{2, "twice what is expected: the meter seems to show peak to peak, or the cable is open on one side", "read the effective value (RMS), check both wires of the input, and start again"},
	{0.5, "half of what is expected: something loads the source, or only one side of a balanced line is connected", "check both wires and what else is connected, and start again"},
}

// plausible holds a value against what is expected of it (0: nothing is). Where it is a known
// mistake away, that is said; where it is far off otherwise, that too.
func plausible(what string, value, expected float64) error {
	if expected == 0 {
		return nil
	}
	r := value / expected
	if math.Abs(r-1) <= plausibleWithin && math.Abs(r/mistakes[2].factor-1) > mistakeWithin {
		return nil
	}
	for _, m := range mistakes {
		if math.Abs(r/m.factor-1) <= mistakeWithin {
			return wrong(m.action, "%s comes out at %s", what, m.what)
		}
	}
	if math.Abs(r-1) <= plausibleWithin {
		return nil
	}
	return wrong("check the connection, the meter and the station file, and start again", "%s comes out at %.3g times what is expected", what, r)
}
