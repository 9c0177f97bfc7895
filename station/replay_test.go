package station_test

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"lotgate/limits"
	"lotgate/station"
	"lotgate/station/record"
)

const captures = "../testdata/captures"

// truth is what a capture's independent model says of it.
type truth struct {
	Readings map[string]json.RawMessage `json:"readings"`
	Expected map[string]limits.Verdict  `json:"expected"`
}

func readLimits(t testing.TB) *limits.File {
	t.Helper()
	path := filepath.Join(captures, "limits.yaml")
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	l, err := limits.Read(path, data, limits.Any)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func evaluateFolder(t testing.TB, dir string, l *limits.File) station.Evaluation {
	t.Helper()
	f, err := record.ReadFolder(dir)
	if err != nil {
		t.Fatal(err)
	}
	e, err := station.Evaluate(f.Captures, l)
	if err != nil {
		t.Fatal(err)
	}
	f.Release()
	return e
}

// TestReplayAgreesWithTheTruth holds every capture of the independent model against the truth
// beside it: verdicts, and each number within 1.5 U.
func TestReplayAgreesWithTheTruth(t *testing.T) {
	l := readLimits(t)
	dirs, _ := filepath.Glob(filepath.Join(captures, "*", "truth.json"))
	if len(dirs) < 10 {
		t.Fatalf("only %d captures found in %s", len(dirs), captures)
	}
	for _, path := range dirs {
		dir := filepath.Dir(path)
		t.Run(filepath.Base(dir), func(t *testing.T) {
			data, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			var want truth
			if err := json.Unmarshal(data, &want); err != nil {
				t.Fatal(err)
			}
			e := evaluateFolder(t, dir, l)
			if e.Verdict != want.Expected["unit"] {
				t.Errorf("unit is %s, expected %s: %s", e.Verdict, want.Expected["unit"], e.Reason)
			}
			compared := 0
			for _, r := range e.Readings {
				if v, ok := want.Expected[r.Name]; ok && v != r.Verdict {
					t.Errorf("%s is %s, expected %s: %s", r.Name, r.Verdict, v, r.Reason)
				}
				if raw, ok := want.Readings[r.Name]; ok && r.Void == nil && r.Missing == "" {
					compared += compare(t, r, raw)
				}
			}
			if compared < 3 {
				t.Errorf("only %d numbers were compared", compared)
			}
		})
	}
}

// compare holds one reading against its true value, or a curve's points against theirs.
func compare(t *testing.T, r record.Judged, raw json.RawMessage) int {
	t.Helper()
	if !r.Curve {
		var v float64
		if err := json.Unmarshal(raw, &v); err != nil {
			t.Fatal(err)
		}
		if d := math.Abs(r.Value - v); d > 1.5*r.Budget.Expanded {
			t.Errorf("%s is %g ± %g, truth %g: %.2f U off", r.Name, r.Value, r.Budget.Expanded, v, d/r.Budget.Expanded)
		}
		return 1
	}
	var points map[string]float64
	if err := json.Unmarshal(raw, &points); err != nil {
		t.Fatal(err)
	}
	n, beyond := 0, 0
	for _, p := range r.Points {
		v, ok := points[strconv.FormatFloat(p.FrequencyHz, 'f', -1, 64)]
		if !ok {
			continue
		}
		n++
		if math.Abs(p.Value-v) > 1.5*p.Expanded {
			beyond++
		}
	}
	// Of some 30 points, each of which is beyond 1.5 U (2.94 u) three times in a thousand,
	// more than two have a chance below 1 in 10 000.
	if beyond > 2 {
		t.Errorf("%s: %d of %d points are more than 1.5 U from the truth", r.Name, beyond, n)
	}
	return n
}

// BenchmarkReplay48k is one capture folder of 18 s at 48 kHz, files and all.
func BenchmarkReplay48k(b *testing.B) {
	l := readLimits(b)
	b.ReportAllocs()
	for b.Loop() {
		evaluateFolder(b, filepath.Join(captures, "good-48k"), l)
	}
}

// BenchmarkEvaluate48k is the same folder without reading its files.
func BenchmarkEvaluate48k(b *testing.B) {
	l := readLimits(b)
	f, err := record.ReadFolder(filepath.Join(captures, "good-48k"))
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := station.Evaluate(f.Captures, l); err != nil {
			b.Fatal(err)
		}
	}
}
