package tolerance

import (
	"strings"
	"testing"

	"lotgate/limits/quantity/document"
)

type holder struct {
	U Tolerance `key:"u"`
}

// TestStandard: an expanded uncertainty at k = 2 is halved (JCGM 100:2008, 6.2).
func TestStandard(t *testing.T) {
	for _, c := range []struct {
		text  string
		value float64
		want  float64
		again string
	}{{"0.4 %", 5, 0.002, "0.4 %"}, {"0.5 mm", 0.25, 0.001, "500 µm"}, {"0.004", 1, 0.002, "0.4 %"}} {
		var h holder
		if err := document.Read("f", []byte("u: "+c.text), &h); err != nil {
			t.Fatal(err)
		}
		if got := h.U.Standard(c.value); got != c.want || h.U.String() != c.again {
			t.Errorf("%s: %g, %q", c.text, got, h.U)
		}
		text, err := document.Write(h)
		var back holder
		if err != nil || document.Read("f", text, &back) != nil || back != h {
			t.Errorf("%s written as %s reads back as %+v (%v)", c.text, text, back, err)
		}
	}
}

func TestRefuses(t *testing.T) {
	for _, bad := range []string{"0 %", "-1 %", "much", "5 kg"} {
		var h holder
		if err := document.Read("f", []byte("u: "+bad), &h); err == nil || !strings.Contains(err.Error(), "write the expanded uncertainty (k = 2)") {
			t.Errorf("%q gave %v", bad, err)
		}
	}
}
