package gauge

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// TestType1: definitions by hand: mean 10.1, s 0.2 from 30 readings, T = 12.
func TestType1(t *testing.T) {
	var x []float64
	d := 0.2 * math.Sqrt(29.0/30)
	for i := range 30 {
		x = append(x, 10.1+d*float64(1-2*(i%2)))
	}
	s, err := Type1Of(ReferenceUnit{"r", 10, 0, x}, 12, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "Cg", s.Cg.Value, 2, 1e-9)
	near(t, "Cgk", s.Cgk.Value, 1.1/0.6, 1e-9)
	// Chi-square with 29 degrees of freedom: 16.047 and 45.722 in printed tables.
	near(t, "low", s.Cg.Low, 2*math.Sqrt(16.047/29), 1e-4)
	near(t, "high", s.Cg.High, 2*math.Sqrt(45.722/29), 1e-4)
	if len(s.Notes) != 0 {
		t.Error(s.Notes)
	}
	vague, err := Type1Of(ReferenceUnit{"r", 10, 0.2, x[:10]}, 12, 0.95)
	if err != nil || len(vague.Notes) != 1 || !(vague.Cgk.High-vague.Cgk.Low > s.Cgk.High-s.Cgk.Low) {
		t.Errorf("%+v, %v", vague, err)
	}
	for want, f := range map[string]func() (Type1, error){
		"needs the width between the limits and has 0": func() (Type1, error) { return Type1Of(ReferenceUnit{"r", 10, 0, x}, 0, 0.95) },
		"too coarse to show its own spread":            func() (Type1, error) { return Type1Of(ReferenceUnit{"r", 10, 1, []float64{1, 1}}, 2, 0.95) },
		"at least 2 readings and has 0":                func() (Type1, error) { return Type1Of(ReferenceUnit{"r", 10, 1, nil}, 2, 0.95) },
	} {
		if _, err := f(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want %q, got %v", want, err)
		}
	}
}

// TestType1Coverage: 50 readings, a reference known to half the gauge's spread.
func TestType1Coverage(t *testing.T) {
	const runs = 4000
	random := rand.New(rand.NewPCG(7, 22514))
	inside := 0
	want := (0.1*60 - 1.5) / 3
	for range runs {
		u := ReferenceUnit{Name: "r", Uncertainty: 0.5, Value: 0.5 * random.NormFloat64()}
		for range 50 {
			u.Readings = append(u.Readings, 1.5+random.NormFloat64())
		}
		s, err := Type1Of(u, 60, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		if s.Cgk.Low <= want && want <= s.Cgk.High {
			inside++
		}
	}
	near(t, "coverage of Cgk", float64(inside)/runs, 0.95, 0.015)
}
