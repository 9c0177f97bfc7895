package reports

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"time"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/chart"
)

func ptr(v float64) *float64 { return &v }

// sampleSpectrum is white noise with a 1/f corner at 40 Hz, scattered as a Welch
// estimate of 24 segments is.
func sampleSpectrum(n int) []chart.NoisePoint {
	random := rand.New(rand.NewPCG(1, 2))
	var s []chart.NoisePoint
	for i := range n {
		f := 2.5 * (1 + float64(i))
		d := 62e-9 * math.Sqrt(1+40/f) * (1 + random.NormFloat64()/10)
		s = append(s, chart.NoisePoint{Frequency: quantity.Frequency(f), Density: quantity.NoiseDensity(d)})
	}
	return s
}

var sampleMask = &limits.Mask{
	Upper: []limits.MaskPoint{{FrequencyHz: 10, DB: 1}, {FrequencyHz: 1000, DB: 1}},
	Lower: []limits.MaskPoint{{FrequencyHz: 10, DB: -2}, {FrequencyHz: 300, DB: -3}, {FrequencyHz: 1000, DB: -6}},
}

// sampleCurve is a band pass of 6 Hz to upperHz, judged by sampleMask.
func sampleCurve(upperHz float64) *chart.Curve {
	c := &chart.Curve{Mask: sampleMask, Reference: 80}
	for i := range 31 {
		f := 10 * math.Pow(100, float64(i)/30)
		level := -10*math.Log10(1+math.Pow(6/f, 2)) - 10*math.Log10(1+math.Pow(f/upperHz, 2)) + 0.12
		u := 0.12 + 0.25*math.Pow(f/1000, 2)
		p := chart.ResponsePoint{Frequency: quantity.Frequency(f), Level: quantity.Decibel(level), U: quantity.Decibel(u), Verdict: limits.Pass}
		lower, upper := sampleMask.At(f)
		if lower != nil && upper != nil {
			a, b := quantity.Decibel(*lower), quantity.Decibel(*upper)
			p.Lower, p.Upper = &a, &b
			switch d := math.Min(level-*lower, *upper-level); {
			case d < -u:
				p.Verdict = limits.Fail
			case d < u:
				p.Verdict = limits.Marginal
			}
		}
		c.Points = append(c.Points, p)
	}
	return c
}

// sample is an ordinary certificate with a verdict.
func sample(v limits.Verdict) Certificate {
	c := Certificate{
		Serial: "MM10-2431-0417", Lot: "2026-W31-A", Supplier: "Nordwelle Bauteile", Part: "MM10 rev C",
		Station: "goods-in 2", Nest: "A", Operator: "K. Amsel", Attempt: 1,
		Time:    time.Date(2026, 8, 3, 9, 41, 27, 0, time.UTC),
		Plan:    Source{"motion module, goods-in", 3, strings.Repeat("3f9a0c52", 8)},
		Limits:  Source{"motion module, goods-in", 3, strings.Repeat("b71e44d0", 8)},
		Verdict: v, Reason: "all 7 judged readings are inside their limits",
		Code: "lotgate:0198f2c4-7b1e-7d53-9a41-5c0e8f1b2a77",
		Rows: []Row{
			{Name: "supply_current", Label: "Supply current", Unit: "A", Value: 31.02e-3, U: 0.14e-3, Lower: ptr(22e-3), Nominal: ptr(31e-3), Upper: ptr(40e-3),
				Verdict: limits.Pass, Reason: "supply current 31.02 mA, inside by 8.98 mA (at most 40 mA)"},
			{Name: "noise_floor.band", Label: "Noise in the band", Unit: "V", Value: 2.31e-6, U: 0.11e-6, Upper: ptr(5e-6),
				Verdict: limits.Pass, Reason: "noise in the band 2.31 µV, inside by 2.69 µV (at most 5 µV)"},
			{Name: "noise_floor.density(100 Hz)", Label: "Noise density at 100 Hz", Unit: "V/√Hz", Value: 73.4e-9, U: 4.1e-9, Upper: ptr(120e-9),
				Verdict: limits.Pass, Reason: "noise density(100 Hz) 73.4 nV/√Hz, inside by 46.6 nV/√Hz (at most 120 nV/√Hz)"},
			{Name: "noise_floor.corner", Label: "Noise corner", Unit: "Hz", Value: 41, U: 6, Notes: []string{"no limits are given"}},
			{Name: "sensitivity.echo", Label: "Echo", Unit: "V", Value: 4.213e-3, U: 0.19e-3, Lower: ptr(2e-3), Upper: ptr(9e-3),
				Verdict: limits.Pass, Reason: "echo 4.21 mV, inside by 2.21 mV (at least 2 mV)"},
			{Name: "response.curve", Label: "Response", Unit: "dB", Curve: true,
				Verdict: limits.Pass, Reason: "response at 10 Hz −1.22 dB, inside by 0.78 dB (at least −2 dB)"},
			{Name: "response.upper_edge", Label: "Upper edge, −3 dB", Unit: "Hz", Value: 1510, U: 42, Lower: ptr(800),
				Verdict: limits.Pass, Reason: "upper edge 1.510 kHz, inside by 0.710 kHz (at least 800 Hz)"},
			{Name: "supply_current_low", Label: "Supply current at 4.75 V", Unit: "A", Value: 30.41e-3, U: 0.14e-3, Lower: ptr(22e-3), Upper: ptr(40e-3),
				Verdict: limits.Pass, Reason: "supply current low 30.41 mA, inside by 8.41 mA (at least 22 mA)"},
		},
		Noise: &chart.Noise{Spectrum: sampleSpectrum(480), Low: 10, High: 1000, Readings: []chart.NoiseReading{
			{NoisePoint: chart.NoisePoint{Frequency: 100, Density: 73.4e-9}, U: 4.1e-9, Upper: (*quantity.NoiseDensity)(ptr(120e-9)), Verdict: limits.Pass}}},
		Response: sampleCurve(1510),
		Calibrations: []Calibration{
			{What: "full scale of input if", Value: 1.0132, U: 0.004, Unit: "V", Date: "2026-02-11", Due: "2027-02-11"},
			{What: "gain before input if", Value: 214.6, U: 0.9, Unit: "1", Date: "2026-02-11", Due: "2027-02-11"},
			{What: "full scale of input sense", Value: 1.0118, U: 0.004, Unit: "V", Date: "2026-02-11", Due: "2027-02-11"},
			{What: "shunt", Value: 2.002, U: 0.004, Unit: "Ω", Date: "2026-02-11", Due: "2027-02-11"},
			{What: "target at 40 Hz", Value: 0.512e-3, U: 0.006e-3, Unit: "m/V", Date: "2026-05-04", Due: "2026-11-04"},
			{What: "standoff", Value: 0.25, U: 0.0005, Unit: "m", Date: "2026-05-04", Due: "2027-05-04"},
		},
	}
	switch v {
	case limits.Fail:
		c.Response = sampleCurve(430)
		c.Rows[5].Verdict = limits.Fail
		c.Rows[5].Reason = "response at 1 kHz −8.0 dB, needs at least −6 dB"
		c.Rows[0].Value, c.Rows[0].Verdict = 41.7e-3, limits.Fail
		c.Rows[0].Reason = "supply current 41.70 mA, needs at most 40 mA"
		c.Rows[6].Value, c.Rows[6].U, c.Rows[6].Verdict, c.Rows[6].Reason = 430, 21, limits.Fail, "upper edge 430 Hz, needs at least 800 Hz"
		c.Reason = "supply current 41.70 mA, needs at most 40 mA; upper edge 430 Hz, needs at least 800 Hz; " + c.Rows[5].Reason
		c.Virtual = true
	case limits.Marginal:
		c.Rows[1].Value, c.Rows[1].U, c.Rows[1].Verdict = 4.93e-6, 0.21e-6, limits.Marginal
		c.Rows[1].Reason = "noise in the band 4.93 µV, inside the limit 5 µV by 0.07 µV, less than its uncertainty 0.21 µV: neither pass nor fail is proven"
		c.Reason = c.Rows[1].Reason
		c.Response = sampleCurve(900)
		c.Attempt = 2
		c.Calibrations[4].Overdue, c.Calibrations[4].Due = true, "2026-07-30"
		c.Warnings = []string{"calibration overdue: target at 40 Hz was due on 2026-07-30; the plan allows it"}
	case limits.Void:
		const why = "the IF input was overloaded: 214 of 96000 samples at full scale: lower the preamplifier's gain or the input's level, then take it again"
		for i := range c.Rows {
			c.Rows[i].Value, c.Rows[i].U, c.Rows[i].Verdict, c.Rows[i].Reason = 0, 0, limits.Void, why
			c.Rows[i].Notes = nil
		}
		c.Noise, c.Response, c.Reason = nil, nil, why
	}
	return c
}

// many is a certificate with n readings, each with a remark, all the rest as usual.
func many(n int) Certificate {
	c := sample(limits.Pass)
	rows := c.Rows
	c.Rows = nil
	for i := range n {
		r := rows[i%len(rows)]
		if i >= len(rows) {
			r.Name = fmt.Sprintf("%s_%d", r.Name, i)
		}
		c.Rows = append(c.Rows, r)
	}
	return c
}

// samples are the certificates every test of the page goes through, by name.
func samples() map[string]Certificate {
	list := map[string]Certificate{
		"pass": sample(limits.Pass), "marginal": sample(limits.Marginal), "fail": sample(limits.Fail), "void": sample(limits.Void),
		"barest": {Serial: "1", Time: time.Unix(1785750000, 0)}, "three-readings": many(3), "fourteen-readings": many(14), "twenty-readings": many(20),
	}

	c := sample(limits.Pass)
	c.Serial = strings.Repeat("MM10-2431-0417/", 9)
	c.Lot = strings.Repeat("Charge-", 12)
	c.Supplier = "東京部品 und Söhne, Ζωή & Мир"
	c.Operator = "Zoe\u0308 \U0001F642 <b>\u202egnihton</b>"
	c.Part = "MM10\tC\n\x07"
	c.Code = strings.Repeat("0198f2c4-7b1e-7d53-", 10)
	list["long-names"] = c

	c = sample(limits.Fail)
	c.Reason = strings.TrimSpace(strings.Repeat(c.Reason+"; ", 14))
	for i := range c.Rows {
		c.Rows[i].Reason = strings.TrimSpace(strings.Repeat("the reading is far outside what was agreed and stays so when it is taken again; ", 3))
	}
	list["long-reasons"] = c

	c = many(14)
	c.Reason = strings.Repeat("an exceedingly long reason that nobody should ever write ", 120)
	for i := range c.Rows {
		c.Rows[i].Reason = strings.Repeat("word after word ", 60)
		c.Rows[i].Verdict = limits.Fail
	}
	c.Warnings = []string{"calibration overdue: shunt was due on 2026-07-30", "the room was at 31 °C"}
	c.Virtual = true
	list["too-long-reasons"] = c

	c = sample(limits.Pass)
	c.Noise = nil
	list["no-noise"] = c
	c = sample(limits.Pass)
	c.Response = nil
	list["no-response"] = c
	c = sample(limits.Pass)
	c.Noise, c.Response, c.Calibrations, c.Code, c.Supplier, c.Part = nil, nil, nil, "", "", ""
	list["bare"] = c

	c = sample(limits.Marginal)
	c.Rows = append(c.Rows, Row{Name: "sensitivity.displacement", Label: "Displacement by the module itself", Unit: "m", Upper: ptr(3e-4),
		Missing: "the third and fourth harmonic do not stand out enough to tell the displacement", Verdict: limits.Void, Reason: "the third and fourth harmonic do not stand out enough to tell the displacement"},
		Row{Name: "response.flatness", Label: "Flatness", Unit: "dB", Value: 19.4, U: 0.4, Upper: ptr(3), Verdict: limits.Fail, Reason: "flatness 19.40 dB, needs at most 3 dB"},
		Row{Name: "sensitivity.phase", Label: "Phase", Unit: "rad", Value: -1.204, U: 0.031, Lower: ptr(-3), Upper: ptr(3), Simple: true, Verdict: limits.Pass, Reason: "phase -1.204 rad, inside by 1.796 rad (at least -3 rad)"},
		Row{Name: "noise_floor.density(1 kHz)", Label: "Noise density at 1 kHz", Unit: "V/√Hz", Value: 61.2e-9, U: 52e-9, Upper: ptr(65e-9), Verdict: limits.Marginal, Reason: "too uncertain"})
	list["odd-rulers"] = c
	return list
}
