package sampling

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
)

// TestClopperPearson holds the exact intervals of R.G. Newcombe, Statistics in Medicine 17 (1998)
// 857, table I, as the reference file gives them.
func TestClopperPearson(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/uncertainty/binomial_intervals.csv")
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(strings.NewReader(string(data)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	column := map[string]int{}
	for i, name := range rows[0] {
		column[name] = i
	}
	checked := 0
	for _, row := range rows[1:] {
		number := func(name string) float64 {
			i, ok := column[name]
			if !ok {
				t.Fatalf("no column %q in %v", name, rows[0])
			}
			v, err := strconv.ParseFloat(row[i], 64)
			if err != nil {
				return math.NaN()
			}
			return v
		}
		if !strings.HasPrefix(row[column["method"]], "clopper") {
			continue
		}
		x, n := number("x"), number("n")
		low, high := ClopperPearson(int(x), int(n), 0.95)
		for _, c := range []struct{ got, want float64 }{{low, number("lower")}, {high, number("upper")}} {
			if math.IsNaN(c.want) {
				continue
			}
			checked++
			if math.Abs(c.got-c.want) > 6e-5 { // four printed digits
				t.Errorf("%g of %g: %.5f, reference %.5f", x, n, c.got, c.want)
			}
		}
	}
	if checked < 6 {
		t.Fatalf("only %d values were checked", checked)
	}
}

func TestNothingKnown(t *testing.T) {
	if low, high := ClopperPearson(0, 0, 0.95); low != 0 || high != 1 {
		t.Errorf("0 of 0 gives %g to %g", low, high)
	}
}
