package quantity

import (
	"errors"
	"math"
	"testing"
)

func TestParse(t *testing.T) {
	for _, c := range []struct {
		text string
		unit Unit
		want float64
	}{
		{"31.5 mA", Ampere, 0.0315}, {"40mA", Ampere, 0.040}, {"0.4 µV/√Hz", VoltPerRootHz, 0.4e-6}, {"0.4 μV/√Hz", VoltPerRootHz, 0.4e-6},
		{"0.4 uV/sqrt(Hz)", VoltPerRootHz, 0.4e-6}, {"70 nV/√Hz", VoltPerRootHz, 70e-9}, {"2 Ω", Ohm, 2}, {"2 \u2126", Ohm, 2}, {"4.7 kohm", Ohm, 4700},
		{"-3 dB", DecibelUnit, -3}, {"−3 dB", DecibelUnit, -3}, {"0.4 %", One, 0.004}, {"200", One, 200}, {"6 ppm", One, 6e-6}, {"1e-3 V", Volt, 1e-3},
		{"10.525 GHz", Hertz, 10.525e9}, {"10 Hz", Hertz, 10}, {"1 kHz", Hertz, 1000}, {"0.20 mm", Metre, 0.2e-3}, {"3 cm", Metre, 0.03}, {"2 m", Metre, 2},
		{"1.5 s", Second, 1.5}, {"10 min", Second, 600}, {"1 h", Second, 3600}, {"250 ms", Second, 0.25}, {"180 °", RadianUnit, math.Pi}, {"23 °C", Celsius, 23},
		{"0.5 mm/V", MetrePerVolt, 0.5e-3}, {"1.4 m/s", MetrePerSecond, 1.4}, {"6 %/V", PerVoltUnit, 0.06}, {"-0.06 1/V", PerVoltUnit, -0.06}, {"+5 V", Volt, 5}, {".5 V", Volt, 0.5},
	} {
		v, err := Parse(c.text, c.unit)
		if err != nil || math.Abs(v-c.want) > 1e-15*math.Abs(c.want) {
			t.Errorf("%q: %g, %v, want %g", c.text, v, err, c.want)
		}
	}
}

func TestParseRefuses(t *testing.T) {
	for _, c := range []struct {
		text string
		unit Unit
		want string
	}{
		{"40 mV", Ampere, `"40 mV" is a voltage: write a current, such as 40 mA`},
		{"40", Ampere, `"40" has no unit: write a current, such as 40 mA`},
		{"forty mA", Ampere, `"forty mA" does not start with a number: write a current, such as 40 mA`},
		{"40 mB", Ampere, `"40 mB" has an unknown unit "mB": write a current, such as 40 mA`},
		{"", Volt, `"" does not start with a number: write a voltage, such as 5 V`},
		{"1e999 V", Volt, `"1e999 V" does not start with a number: write a voltage, such as 5 V`},
		{"5 V V", Volt, `"5 V V" has an unknown unit "V V": write a voltage, such as 5 V`},
	} {
		_, err := Parse(c.text, c.unit)
		var wrong *WrongUnitError
		if !errors.As(err, &wrong) || err.Error() != c.want {
			t.Errorf("%q: %v, want %s", c.text, err, c.want)
		}
	}
}

func TestPrint(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{Print(0.0315, Ampere), "31.5 mA"}, {Print(0, Volt), "0 V"}, {Print(999.9999, Hertz), "999.9999 Hz"}, {Print(1000, Hertz), "1 kHz"},
		{Print(0.004, One), "0.004"}, {Ratio(0.004).Percent(), "0.4 %"}, {Print(-2.5, DecibelUnit), "-2.5 dB"}, {Print(1e-6, Volt), "1 µV"},
		{PrintWith(0.03102, 0.00014, Ampere), "31.02 mA ± 0.14 mA"}, {PrintTo(0.03102, 0.00014, Ampere), "31.02 mA"},
		{PrintWith(0, 2e-6, Volt), "0.0 µV ± 2.0 µV"}, {PrintWith(5, 0, Volt), "5 V"}, {PrintWith(1.234e-3, 0.5, Volt), "1 mV ± 500 mV"},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// FuzzParse: what parses prints, all digits kept, and parses back to the same value.
func FuzzParse(f *testing.F) {
	seeds := []string{"31.5 mA", "0.4 µV/√Hz", "-3 dB", "1e-3 V", "10.525 GHz", "0.4 %", "2 Ω", "1 h", "0 V", "5e-324 V", "1.7e308 Hz"}
	for _, s := range seeds {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		unit := Detect(text)
		v, err := Parse(text, unit)
		if err != nil {
			return
		}
		again, err := Parse(PrintExact(v, unit), unit)
		if err != nil {
			t.Fatalf("%q printed as %q: %v", text, PrintExact(v, unit), err)
		}
		// Scaling by a power of ten may move the last bit or two.
		if math.Abs(again-v) > 1e-15*math.Abs(v) && math.Abs(v) > 1e-290 {
			t.Fatalf("%q is %g, printed %q, read back %g", text, v, PrintExact(v, unit), again)
		}
	})
}
