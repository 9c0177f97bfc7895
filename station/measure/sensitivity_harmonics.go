package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
)

// responseBetweenHarmonics is the standard uncertainty, relative, of taking the module's
// response at twice the tone for that at the tone (0.05 dB; the tone lies in the flat
// part of the response: common practice).
const responseBetweenHarmonics = 0.006

// fromHarmonics is V0 = √((H1/2J1)² + (H2/2J2)²) at one position.
func (m *Sensitivity) fromHarmonics(c *Capture, f toneFit) (Result, error) {
	beta := phaseIndex(float64(c.Target.Displacement), c.Carrier)
	if beta < LeastBeta {
		return Result{}, fmt.Errorf("step %s: the method harmonics needs β of %.1f or more and has %.3f: a displacement of at least %v",
			c.Step, LeastBeta, beta, quantity.Length(LeastBeta*float64(wavelength(c.Carrier))/(4*math.Pi)))
	}
	if len(f.harmonics) < 2 {
		return Result{}, fmt.Errorf("step %s: the sample rate does not hold the second harmonic of %v", c.Step, c.Target.Tone)
	}
	h1, h2 := f.harmonics[0], f.harmonics[1]
	k1, k2 := 1/(2*math.Jn(1, beta)), 1/(2*math.Jn(2, beta))
	p, q := cmplx.Abs(h1.a)*k1, cmplx.Abs(h2.a)*k2
	up, uq := math.Pow(h1.sigma*k1, 2), math.Pow(h2.sigma*k2, 2)
	power := p*p + q*q
	echo := math.Sqrt(math.Max(power-up-uq, 0))
	if power == 0 {
		power = 1e-300
	}
	scatter := math.Sqrt((p*p*up + q*q*uq) / power)
	slope := (p*p*slopeOfJ(1, beta) + q*q*slopeOfJ(2, beta)) / power
	components := append([]Component{{"scatter of the fitted harmonics", scatter, h1.dof + h2.dof}}, m.calibrations(c, echo, slope)...)
	components = append(components, Component{"the module's response between tone and second harmonic (common practice)", echo * q * q / power * responseBetweenHarmonics, 0})
	e := Reading{Name: c.Step + ".echo", Unit: "V", Value: echo, Budget: Combine(components...)}
	return Result{Readings: []Reading{e, m.phase(c, p, q, up, uq, h1.dof+h2.dof, false, power), m.displacement(c, f)}}, nil
}

// displacement works the target's peak displacement out of the ratios J1/J3 and J2/J4.
func (m *Sensitivity) displacement(c *Capture, f toneFit) Reading {
	r := Reading{Name: c.Step + ".displacement", Unit: "m"}
	var sum, weight, dof float64
	for n := 1; n <= 2 && n+2 <= len(f.harmonics); n++ {
		low, high := f.harmonics[n-1], f.harmonics[n+1]
		a, b := cmplx.Abs(low.a), cmplx.Abs(high.a)
		if b < 10*high.sigma || a < 10*low.sigma {
			continue
		}
		beta, ok := betaOfRatio(n, b/a)
		if !ok {
			continue
		}
		// dln(J_{n+2}/J_n)/dln β tells how the ratio's scatter becomes β's.
		slope := slopeOfJ(n+2, beta) - slopeOfJ(n, beta)
		u := beta / slope * math.Hypot(math.Hypot(high.sigma/b, low.sigma/a), responseBetweenHarmonics)
		sum += beta / (u * u)
		weight += 1 / (u * u)
		dof += high.dof
	}
	if weight == 0 {
		r.Missing = "the third and fourth harmonic do not stand out enough to tell the displacement"
		return r
	}
	perBeta := float64(wavelength(c.Carrier)) / (4 * math.Pi)
	r.Value = sum / weight * perBeta
	r.Budget = Combine(Component{"scatter of the fitted harmonics, response between them", perBeta / math.Sqrt(weight), dof})
	return r
}

// betaOfRatio solves J_{n+2}(β)/J_n(β) = ratio for β between 0 and the first zero of
// J_n's neighbourhood, where the ratio rises monotonically.
func betaOfRatio(n int, ratio float64) (float64, bool) {
	low, high := 1e-6, 3.0
	f := func(b float64) float64 { return math.Jn(n+2, b)/math.Jn(n, b) - ratio }
	if f(high) < 0 {
		return 0, false
	}
	for range 80 {
		mid := (low + high) / 2
		if f(mid) < 0 {
			low = mid
		} else {
			high = mid
		}
	}
	return (low + high) / 2, true
}
