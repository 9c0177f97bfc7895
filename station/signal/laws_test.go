package signal

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
)

// inverse is the inverse transform of a one-sided spectrum into the first samples of x.
func inverse(re, im, x []float64) {
	m := 2 * len(re)
	c := make([]complex128, m/2+1)
	for k := range re {
		c[k] = complex(re[k], im[k]) / 2
	}
	full := fourier.NewFFT(m).Sequence(nil, c)
	copy(x, full)
}

// TestWindowConstants holds the windows against G. Heinzel et al. 2002 and F.J. Harris 1978.
func TestWindowConstants(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/signal/windows.csv")
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(strings.NewReader(string(data)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	column := 0
	for i, name := range rows[0] {
		if name == "nenbw_H" {
			column = i
		}
	}
	for _, row := range rows[1:] {
		want, err := strconv.ParseFloat(row[column], 64)
		if err != nil {
			continue
		}
		var got float64
		switch row[0] {
		case "hann":
			got = NoiseBandwidth(Hann(4096))
		case "rectangular":
			got = NoiseBandwidth(Tukey(4096, 0))
		default:
			continue
		}
		if math.Abs(got-want) > 5e-4 {
			t.Errorf("%s: noise bandwidth %.5f, published %.4f", row[0], got, want)
		}
	}
	// Tukey window: ∫w² = 1 − 5α/8, ∫w⁴ = 1 − 93α/128 (integration by hand).
	x := make([]float64, 9000)
	s := Periodogram(x, 1)
	want := (1 - 93*taperShare/128) / math.Pow(1-5*taperShare/8, 2)
	if math.Abs(s.Spread-want) > 1e-3 {
		t.Errorf("spread %.4f, by hand %.4f", s.Spread, want)
	}
}

// TestCrestFactors holds Schroeder phases against the published crest factors of flat multitones
// (M.R. Schroeder 1970; S. Boyd 1986; values recomputed, see the file).
func TestCrestFactors(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/signal/multitone_crest.csv")
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(strings.NewReader(string(data)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	checked := 0
	for _, row := range rows[1:] {
		n, _ := strconv.Atoi(row[0])
		want, _ := strconv.ParseFloat(row[2], 64)
		if n < 8 || n > 64 {
			continue
		}
		lines, flat := make([]int, n), make([]float64, n)
		for i := range lines {
			lines[i], flat[i] = i+1, 1
		}
		got := Crest(Multitone(lines, flat, SchroederPhases(lines, flat), 256*n))
		if math.Abs(got/want-1) > 0.02 {
			t.Errorf("%d tones: crest factor %.4f, published %.4f", n, got, want)
		}
		checked++
	}
	if checked < 4 {
		t.Fatalf("only %d crest factors were checked", checked)
	}
}

func TestOddLinesKeepTheirRules(t *testing.T) {
	lines := OddLines(4, 10, 1000, 31, 6, 50, 1.2)
	if len(lines) != 31 {
		t.Fatalf("%d lines instead of 31: %v", len(lines), lines)
	}
	for i, k := range lines {
		hz := float64(k) / 4
		if k%2 == 0 || i > 0 && k-lines[i-1] < 6 || math.Abs(hz-50*math.Round(hz/50)) < 1.2 {
			t.Errorf("line %d (%g Hz) after %v", k, hz, lines[:i])
		}
	}
	if lines[0] < 40 || float64(lines[30])/4 < 950 {
		t.Errorf("the band is not covered: %v", lines)
	}
}

func TestUnsteadyRecordsAreFoundAndQuietOnesNot(t *testing.T) {
	r := rand.New(rand.NewPCG(16, 1))
	alarms := 0
	for trial := range 300 {
		x := make([]float64, 12000)
		for i := range x {
			x[i] = r.NormFloat64()
		}
		if _, ok := FindUnsteady(Segments(x, 2000, 0.5), 10, 900); !ok {
			alarms++
		}
		for i := range x {
			d := (float64(i)/2000 - 3) / 0.3
			x[i] += 1.5 * math.Exp(-d*d/2) * math.Cos(2*math.Pi*60*float64(i)/2000)
		}
		worst, ok := FindUnsteady(Segments(x, 2000, 0.5), 10, 900)
		if ok || math.Abs(worst.Seconds-3) > 0.6 || worst.LowHz > 60 || worst.HighHz < 60 {
			t.Fatalf("trial %d: the burst at 3 s and 60 Hz was reported as %+v, %v", trial, worst, ok)
		}
	}
	if alarms > 1 {
		t.Errorf("%d false alarms in 300 quiet records", alarms)
	}
}

func TestLookFindsWhatIsWrong(t *testing.T) {
	r := rand.New(rand.NewPCG(17, 1))
	fresh := func() []float64 {
		x := make([]float64, 8000)
		for i := range x {
			x[i] = 1e-3 * r.NormFloat64()
		}
		return x
	}
	if h := Look(fresh(), 8000); h.AtFullScale != 0 || h.GapStart >= 0 || math.Abs(h.StepRMS/1e-3-1) > 0.05 {
		t.Errorf("a good record looks %+v", h)
	}
	x := fresh()
	x[100], x[101], x[102] = 1, -1, 1
	if h := Look(x, 8000); h.AtFullScale != 3 {
		t.Errorf("overload looks %+v", h)
	}
	for _, start := range []int{0, 1111, 7800} {
		x := fresh()
		for i := start; i < min(start+160, len(x)); i++ {
			x[i] = 1e-7 * r.NormFloat64()
		}
		if h := Look(x, 8000); math.Abs(h.GapStart-float64(start)/8000) > 0.009 {
			t.Errorf("a gap at %g s looks %+v", float64(start)/8000, h)
		}
	}
	if h := Look(make([]float64, 8000), 8000); h.StepRMS != 0 {
		t.Errorf("silence looks %+v", h)
	}
}
