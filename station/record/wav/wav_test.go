package wav

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

var formats = []Format{{8000, 1, 16, false}, {48000, 1, 24, false}, {48000, 2, 24, false}, {96000, 3, 32, false}, {44100, 2, 32, true}}

func noise(channels, frames int) [][]float64 {
	r := rand.New(rand.NewPCG(1, 1))
	out := make([][]float64, channels)
	for c := range out {
		out[c] = make([]float64, frames)
		for i := range out[c] {
			out[c][i] = 2*r.Float64() - 1
		}
		out[c][0], out[c][frames-1] = -1, 0.5
	}
	return out
}

func TestRoundTrip(t *testing.T) {
	for _, f := range formats {
		x := noise(f.Channels, 257)
		data, err := Encode(f, x)
		if err != nil {
			t.Fatal(err)
		}
		var want []int
		for c := f.Channels; c > 0; c-- {
			want = append(want, c)
		}
		g, y, err := Decode("x.wav", data, want)
		if err != nil || g != f {
			t.Fatalf("%+v became %+v, %v", f, g, err)
		}
		step := math.Ldexp(1, 1-f.Bits)
		if f.Float {
			step = math.Ldexp(1, -24)
		}
		for i, c := range want {
			for n := range y[i] {
				if d := math.Abs(y[i][n] - x[c-1][n]); d > step/2*1.0001 {
					t.Fatalf("%+v: channel %d, frame %d off by %g", f, c, n, d)
				}
			}
		}
	}
}

func TestFullScale(t *testing.T) {
	f := Format{8000, 1, 24, false}
	data, err := Encode(f, [][]float64{{2, -2, 0, 1.0 / (1 << 23)}})
	if err != nil {
		t.Fatal(err)
	}
	_, y, err := Decode("x.wav", data, []int{1})
	if err != nil || y[0][0] != 1-math.Ldexp(1, -23) || y[0][1] != -1 || y[0][2] != 0 || y[0][3] != math.Ldexp(1, -23) {
		t.Errorf("%v, %v", y, err)
	}
}

// TestEveryTruncation cuts a file at each byte: it is refused with its place, never half read.
func TestEveryTruncation(t *testing.T) {
	for _, f := range formats {
		data, err := Encode(f, noise(f.Channels, 9))
		if err != nil {
			t.Fatal(err)
		}
		whole := len(data) - (9*f.Bits/8*f.Channels)%2
		for cut := range whole {
			_, _, err := Decode("x.wav", data[:cut], []int{1})
			var e *Error
			if !errors.As(err, &e) || e.Action == "" {
				t.Fatalf("%+v cut at %d of %d gave %v", f, cut, whole, err)
			}
		}
	}
}

func TestRefuses(t *testing.T) {
	good, err := Encode(Format{8000, 1, 24, false}, noise(1, 10))
	if err != nil {
		t.Fatal(err)
	}
	poke := func(at int, b ...byte) []byte {
		out := append([]byte(nil), good...)
		copy(out[at:], b)
		return out
	}
	nan, _ := Encode(Format{8000, 1, 32, true}, [][]float64{{0, math.NaN()}})
	for name, data := range map[string][]byte{
		"wrong magic": poke(0, 'X'), "compressed": poke(20, 85), "8 bit": poke(34, 8), "no channels": poke(22, 0), "no data": poke(36, 'j', 'u', 'n', 'k'), "not a number": nan,
	} {
		if _, _, err := Decode("x.wav", data, []int{1}); err == nil {
			t.Errorf("%s was accepted", name)
		}
	}
	if _, _, err := Decode("x.wav", good, []int{2}); err == nil {
		t.Error("a channel that is not there was read")
	}
	if _, err := Encode(Format{8000, 2, 24, false}, [][]float64{{1}, {1, 2}}); err == nil {
		t.Error("channels of different length were written")
	}
}

func FuzzDecode(f *testing.F) {
	for _, format := range formats {
		data, err := Encode(format, noise(format.Channels, 5))
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		_, x, err := Decode("x.wav", data, []int{1})
		if err == nil && (len(x) != 1 || len(x[0]) == 0 || len(x[0])*2 > len(data)) {
			t.Fatalf("%d samples out of %d bytes", len(x[0]), len(data))
		}
	})
}

func BenchmarkDecode24(b *testing.B) {
	data, err := Encode(Format{48000, 1, 24, false}, noise(1, 864000))
	if err != nil {
		b.Fatal(err)
	}
	b.SetBytes(int64(len(data)))
	for b.Loop() {
		_, x, err := Decode("x.wav", data, []int{1})
		if err != nil {
			b.Fatal(err)
		}
		GiveBack(x[0])
	}
}
