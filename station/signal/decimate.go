package signal

import (
	"math"
	"sync"
)

// stopBand is the attenuation the decimation filters are designed for, dB: what folds back is
// then below the last bit of a 16-bit input and far below the noise of any 24-bit one.
const stopBand = 98.0

// Decimated is a signal at a lower rate.
type Decimated struct {
	Samples []float64
	Rate    float64 // samples per second
	// Delay is the time of the first sample after the first input sample, s. The
	// filters are of linear phase and centred; only samples that the whole filter
	// covers are kept, so nothing is invented at the ends.
	Delay float64
}

// Decimate lowers the rate as far as a band from 0 to passHz allows, by stages of
// two, each a half-band filter (Kaiser window, 98 dB). Up to passHz the gain is
// within 1e-5 of one. The input is not changed; where no stage fits it is returned
// as it is.
func Decimate(x []float64, rate, passHz float64) Decimated {
	d := Decimated{Samples: x, Rate: rate}
	scratch, _ := scratches.Get().(*[]float64)
	if scratch == nil {
		scratch = new([]float64)
	}
	defer scratches.Put(scratch)
	if cap(*scratch) < len(x)/2 {
		*scratch = make([]float64, len(x)/2)
	}
	for {
		side := halfBand(passHz / d.Rate)
		if side == nil || len(d.Samples) < 8*len(side) {
			break
		}
		reach := 2*len(side) - 1 // input samples on either side of the centre
		d.Delay += float64(reach) / d.Rate
		// From the second stage on, the scratch is overwritten from its start while it is
		// read further on: output i needs inputs from 2i on only.
		d.Samples = decimateByTwo(*scratch, d.Samples, side)
		d.Rate /= 2
	}
	if d.Rate != rate {
		d.Samples = append([]float64(nil), d.Samples...)
	}
	return d
}

// scratches holds the intermediate stages' memory.
var scratches sync.Pool

// halfBand gives the weights at odd distances 1, 3, 5 … from the centre (which has
// ½) of a half-band low-pass that keeps 0…pass (in cycles per sample) clear of what
// folds onto it; nil where the transition would be too narrow to pay.
func halfBand(pass float64) []float64 {
	transition := 0.5 - 2*pass // of the band between pass and ½−pass
	if transition < 0.06 {
		return nil
	}
	// J.F. Kaiser 1974: order = (A − 7.95)/(2.285·Δω).
	order := (stopBand - 7.95) / (2.285 * 2 * math.Pi * transition)
	count := int(math.Ceil((order/2 + 1) / 2))
	beta := 0.1102 * (stopBand - 8.7)
	side := make([]float64, count)
	sum := 0.0
	reach := float64(2 * count)
	for k := range side {
		n := float64(2*k + 1)
		ideal := math.Sin(math.Pi*n/2) / (math.Pi * n)
		r := n / reach
		side[k] = ideal * besselI0(beta*math.Sqrt(1-r*r)) / besselI0(beta)
		sum += side[k]
	}
	for k := range side { // unit gain at zero frequency
		side[k] *= 0.25 / sum
	}
	return side
}

func decimateByTwo(to, x, side []float64) []float64 {
	reach := 2*len(side) - 1
	out := to[:(len(x)-2*reach+1)/2]
	switch len(side) {
	case 4:
		a, b, c, d := side[0], side[1], side[2], side[3]
		for i := range out {
			w := x[2*i : 2*i+15 : 2*i+15]
			out[i] = 0.5*w[7] + a*(w[6]+w[8]) + b*(w[4]+w[10]) + c*(w[2]+w[12]) + d*(w[0]+w[14])
		}
	case 5:
		a, b, c, d, e := side[0], side[1], side[2], side[3], side[4]
		for i := range out {
			w := x[2*i : 2*i+19 : 2*i+19]
			out[i] = 0.5*w[9] + a*(w[8]+w[10]) + b*(w[6]+w[12]) + c*(w[4]+w[14]) + d*(w[2]+w[16]) + e*(w[0]+w[18])
		}
	default:
		for i := range out {
			w := x[2*i : 2*i+2*reach+1]
			s := 0.5 * w[reach]
			lo, hi := reach-1, reach+1
			for _, h := range side {
				s += h * (w[lo] + w[hi])
				lo, hi = lo-2, hi+2
			}
			out[i] = s
		}
	}
	return out
}

// besselI0 is the modified Bessel function of order zero by its power series
// (Abramowitz & Stegun 9.6.12).
func besselI0(x float64) float64 {
	sum, term := 1.0, 1.0
	q := x * x / 4
	for k := 1.0; term > 1e-17*sum; k++ {
		term *= q / (k * k)
		sum += term
	}
	return sum
}
