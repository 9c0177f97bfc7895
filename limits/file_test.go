package limits

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lotgate/limits/quantity"
)

// units is what a plan would say of the readings used here.
func units(name string) (quantity.Unit, bool, bool) {
	switch name {
	case "supply_current":
		return quantity.Ampere, false, true
	case "sensitivity.echo":
		return quantity.Volt, false, true
	case "response.curve":
		return quantity.DecibelUnit, true, true
	}
	return quantity.Unit{}, false, false
}

func TestReadAcceptsGoodFiles(t *testing.T) {
	files, _ := filepath.Glob("../testdata/limits/good/*.yaml")
	if len(files) < 2 {
		t.Fatalf("only %d good files found", len(files))
	}
	for _, path := range files {
		data, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		for _, of := range []UnitOf{Any, units} {
			f, err := Read(path, data, of)
			if err != nil {
				t.Errorf("%s: %v", path, err)
				continue
			}
			if l := f.Readings["supply_current"]; *l.Lower != 0.022 || *l.Upper != 0.040 || l.Unit != quantity.Ampere || l.Decision != Guarded {
				t.Errorf("%s: supply_current is %+v", path, l)
			}
		}
	}
}

func TestReadRefuses(t *testing.T) {
	for _, c := range []struct{ name, readings, want string }{
		{"wrong dimension", "supply_current: {upper: 40 mV}", `l.yaml:4: supply_current: upper "40 mV" is a voltage: write a current, such as 40 mA`},
		{"no unit", "supply_current: {upper: 40}", `l.yaml:4: supply_current: upper "40" has no unit: write a current, such as 40 mA`},
		{"unknown key", "supply_current: {top: 40 mA}", `l.yaml:4: unknown key "top" in this mapping: one of lower, nominal, upper, decision, mask`},
		{"lower above upper", "supply_current: {lower: 40 mA, upper: 22 mA}", "l.yaml:4: supply_current: the lower limit is not below the upper: exchange them, or correct one"},
		{"nominal outside", "supply_current: {lower: 22 mA, nominal: 50 mA, upper: 40 mA}", "l.yaml:4: supply_current: the nominal value lies outside the limits: correct one of them"},
		{"empty", "supply_current: {nominal: 31 mA}", "l.yaml:4: supply_current has neither lower nor upper limit: write one of them, or take the reading out"},
		{"mask on a number", "supply_current: {mask: {upper: [[10 Hz, 1 dB], [1 kHz, 1 dB]]}}", "l.yaml:4: supply_current is no curve and has no mask: write lower: or upper:"},
		{"number on a curve", "response.curve: {upper: 1 dB}", "l.yaml:4: response.curve is a curve and needs a mask: write mask: {upper: [[10 Hz, 1 dB], …], lower: …}"},
		{"mask falls", "response.curve: {mask: {upper: [[1 kHz, 1 dB], [10 Hz, 1 dB]]}}", "l.yaml:4: response.curve: the upper mask does not rise in frequency at 10 Hz: list the points from low to high frequency"},
		{"mask crosses", "response.curve: {mask: {upper: [[10 Hz, 1 dB], [1 kHz, 1 dB]], lower: [[10 Hz, -1 dB], [1 kHz, 2 dB]]}}", "l.yaml:4: response.curve: at 1 kHz the lower mask is not below the upper: correct one of them"},
		{"unknown decision", "supply_current: {upper: 40 mA, decision: strict}", `l.yaml:4: decision "strict" is not known: one of guarded, simple`},
		{"mixed dimensions of an unknown reading", "other: {lower: 1 mA, upper: 2 mV}", `l.yaml:4: other: upper "2 mV" is a voltage: write a current, such as 40 mA`},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Read("l.yaml", []byte("limits: x\nrevision: 1\nreadings:\n  "+c.readings+"\n"), units)
			if err == nil || err.Error() != c.want {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
		})
	}
	if _, err := Read("l.yaml", []byte("limits: x\nrevision: 0\nreadings: {}\n"), units); err == nil || !strings.Contains(err.Error(), "revision") {
		t.Errorf("revision 0 gave %v", err)
	}
}

func TestSchemaIsWritten(t *testing.T) {
	text, err := Schema()
	if err != nil || !strings.Contains(string(text), `"readings"`) {
		t.Errorf("%v: %.80s", err, text)
	}
}
