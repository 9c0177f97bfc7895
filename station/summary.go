package station

import (
	"context"
	"fmt"
	"math"
	"sort"
	"strings"

	"gonum.org/v1/gonum/stat"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/limits/sampling"
	"lotgate/station/record"
)

// Summary is a lot as a quality engineer wants to see it.
type Summary struct {
	Lot    string
	Yield  record.Yield
	Series []Series
}

// Series is one reading over all units of a lot, from each unit's last valid attempt.
type Series struct {
	Name   string
	Unit   quantity.Unit
	Values []float64
	Lower  *float64
	Upper  *float64
	Fails  int
}

// Summarise reads a lot from the store.
func Summarise(ctx context.Context, s *record.Store, lot string) (Summary, error) {
	y, err := s.Yield(ctx, lot)
	if err != nil {
		return Summary{}, err
	}
	last := map[string]*record.Attempt{}
	var order []string
	err = s.Attempts(ctx, record.Filter{Lot: lot}, func(a *record.Attempt) bool {
		if a.Verdict == limits.Void {
			return true
		}
		if last[a.Serial] == nil {
			order = append(order, a.Serial)
		}
		last[a.Serial] = a
		return true
	})
	out := Summary{Lot: lot, Yield: y}
	at := map[string]int{}
	for _, serial := range order {
		for _, r := range last[serial].Readings {
			if r.Curve || r.Verdict == limits.None || r.Void != nil || r.Missing != "" {
				continue
			}
			i, ok := at[r.Name]
			if !ok {
				unit, _ := quantity.UnitBySymbol(r.Unit)
				i = len(out.Series)
				at[r.Name] = i
				out.Series = append(out.Series, Series{Name: r.Name, Unit: unit, Lower: r.Lower, Upper: r.Upper})
			}
			x := &out.Series[i]
			x.Values = append(x.Values, r.Value)
			if r.Verdict == limits.Fail {
				x.Fails++
			}
		}
	}
	return out, err
}

// String is the summary as text.
func (s Summary) String() string {
	var b strings.Builder
	y := s.Yield
	fmt.Fprintf(&b, "Lot %s: %d units, %d passed, %d marginal, %d failed, %d without a valid measurement; %d attempts, %d of them void\n",
		s.Lot, y.Units, y.Passed, y.Marginal, y.Failed, y.NeverValid, y.Attempts, y.VoidRuns)
	fmt.Fprintf(&b, "First-pass yield %s\n", share(y.FirstPass, y.Valid))
	fmt.Fprintf(&b, "Final yield      %s\n", share(y.Passed, y.Valid))
	if len(y.FailReasons) > 0 {
		b.WriteString("\nReasons for failing\n")
		var names []string
		for n := range y.FailReasons {
			names = append(names, n)
		}
		sort.Slice(names, func(i, k int) bool {
			a, c := y.FailReasons[names[i]], y.FailReasons[names[k]]
			return a > c || a == c && names[i] < names[k]
		})
		for _, n := range names {
			fmt.Fprintf(&b, "  %3d  %-22s %s\n", y.FailReasons[n], n, strings.Repeat("▇", y.FailReasons[n]))
		}
	}
	fmt.Fprintf(&b, "\n%-22s %4s  %12s %12s %12s %12s  %5s\n", "Reading", "n", "mean", "s", "least", "largest", "fails")
	for _, x := range s.Series {
		mean, sd := stat.MeanStdDev(x.Values, nil)
		low, high := math.Inf(1), math.Inf(-1)
		for _, v := range x.Values {
			low, high = math.Min(low, v), math.Max(high, v)
		}
		spread := "needs 2"
		if len(x.Values) > 1 {
			spread = quantity.PrintTo(sd, sd/5, x.Unit)
		}
		digits := math.Abs(mean) / 100
		fmt.Fprintf(&b, "%-22s %4d  %12s %12s %12s %12s  %5d\n", x.Name, len(x.Values), quantity.PrintTo(mean, digits, x.Unit), spread,
			quantity.PrintTo(low, digits, x.Unit), quantity.PrintTo(high, digits, x.Unit), x.Fails)
	}
	return b.String()
}

// share prints a share with its exact 95 % interval.
func share(k, n int) string {
	if n == 0 {
		return "unknown: no unit has a valid measurement"
	}
	low, high := sampling.ClopperPearson(k, n, 0.95)
	return fmt.Sprintf("%.1f %% (%d of %d; between %.1f %% and %.1f %% at 95 %% confidence)", 100*float64(k)/float64(n), k, n, 100*low, 100*high)
}
