package signal

import (
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// TestLinearFitOfPublishedData fits the line of NIST's data set Norris (Statistical Reference Datasets,
// linear regression) with certified coefficients and standard deviations. The
// real part of y carries the data, the imaginary part half of them.
func TestLinearFitOfPublishedData(t *testing.T) {
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "reference", "statistics", "strd", "Norris.dat"))
	if err != nil {
		t.Fatal(err)
	}
	rows, y := [][]float64{}, []complex128{}
	for _, line := range strings.Split(string(data), "\n")[60:] { // data from line 61: y, x
		words := strings.Fields(line)
		if len(words) != 2 {
			continue
		}
		v, err := strconv.ParseFloat(words[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		x, err := strconv.ParseFloat(words[1], 64)
		if err != nil {
			t.Fatal(err)
		}
		rows, y = append(rows, []float64{1, x}), append(y, complex(v, v/2))
	}
	if len(rows) != 36 {
		t.Fatalf("%d points instead of 36", len(rows))
	}
	f, ok := FitLinear(rows, y)
	if !ok {
		t.Fatal("no fit")
	}
	for k, want := range [][2]float64{{-0.262323073774029, 0.232818234301152}, {1.00211681802045, 0.429796848199937e-3}} {
		if math.Abs(real(f.Coefficient[k])/want[0]-1) > 1e-10 || math.Abs(2*imag(f.Coefficient[k])/want[0]-1) > 1e-10 {
			t.Errorf("coefficient %d: %.14g, certified %.14g", k, f.Coefficient[k], want[0])
		}
		for direction, share := range map[complex128]float64{1: 1, 2i: 0.5, 3 - 6i: 0, -2 - 1i: math.Sqrt(1.25)} {
			if got := f.Along(k, direction); math.Abs(got/want[1]-share) > 1e-6 {
				t.Errorf("its standard deviation along %v: %.14g, certified %.14g times %g", direction, got, want[1], share)
			}
		}
		if got := f.Largest(k); math.Abs(got/want[1]/math.Sqrt(1.25)-1) > 1e-9 {
			t.Errorf("its largest standard deviation: %.14g", got)
		}
	}
}

func TestLinearFitRefuses(t *testing.T) {
	for name, rows := range map[string][][]float64{
		"no freedom":  {{1, 0}, {0, 1}},
		"same column": {{1, 1}, {2, 2}, {3, 3}, {4, 4}},
		"nothing":     {},
	} {
		if _, ok := FitLinear(rows, make([]complex128, len(rows))); ok {
			t.Errorf("%s gave a fit", name)
		}
	}
}
