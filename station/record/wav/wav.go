// Package wav reads and writes WAV files: PCM of 16, 24 and 32 bit and IEEE float of
// 32 bit, any number of channels. Samples are fractions of digital full scale.
package wav

import (
	"encoding/binary"
	"fmt"
	"math"
	"sync"
)

// Format is how samples are stored.
type Format struct {
	Rate     int
	Channels int
	Bits     int
	Float    bool
}

// An Error says where in a file what is wrong and what to do.
type Error struct {
	File   string
	Offset int // bytes from the start
	What   string
	Action string
}

func (e *Error) Error() string {
	return fmt.Sprintf("%s: at byte %d: %s: %s", e.File, e.Offset, e.What, e.Action)
}

// header codes of the format chunk.
const (
	codePCM        = 1
	codeFloat      = 3
	codeExtensible = 0xFFFE
)

// Decode reads the channels asked for (from 1) out of a WAV file's bytes. The lengths
// are equal. A file shorter than its header says is refused: what is missing is evidence.
func Decode(file string, data []byte, channels []int) (Format, [][]float64, error) {
	f, start, size, err := parse(file, data)
	if err != nil {
		return f, nil, err
	}
	width := f.Bits / 8 * f.Channels
	frames := size / width
	if frames == 0 {
		return f, nil, &Error{file, start, "it holds no samples", "record it again"}
	}
	out := make([][]float64, len(channels))
	for i, c := range channels {
		if c < 1 || c > f.Channels {
			return f, nil, &Error{file, 0, fmt.Sprintf("it has %d channels and channel %d was asked for", f.Channels, c), "correct the channel under inputs"}
		}
		out[i] = Buffer(frames)
		at := start + (c-1)*f.Bits/8
		if bad := decode(out[i], data[at:start+size], width, f); bad >= 0 {
			return f, nil, &Error{file, start + bad*width, "a sample is not a number", "record it again"}
		}
	}
	return f, out, nil
}

// buffers are samples that were given back.
var buffers sync.Pool

// Buffer gives a slice of n samples of any content, one that was given back where there is one.
func Buffer(n int) []float64 {
	if b, ok := buffers.Get().(*[]float64); ok && cap(*b) >= n {
		return (*b)[:n]
	}
	return make([]float64, n)
}

// GiveBack lets samples be used again; the caller must hold no other reference to them.
func GiveBack(b []float64) { buffers.Put(&b) }

// decode fills out from interleaved data and gives the index of a sample that is not a
// finite number, −1 if all are.
func decode(out []float64, data []byte, width int, f Format) int {
	at := 0
	switch {
	case f.Float:
		for i := range out {
			v := float64(math.Float32frombits(binary.LittleEndian.Uint32(data[at:])))
			if v-v != 0 {
				return i
			}
			out[i] = v
			at += width
		}
	case f.Bits == 16:
		for i := range out {
			out[i] = float64(int16(binary.LittleEndian.Uint16(data[at:]))) * (1.0 / (1 << 15))
			at += width
		}
	case f.Bits == 24 && width == 3:
		last := len(out) - 1 // four bytes are read for each three, which the last has not
		for i := 0; i < last; i++ {
			out[i] = float64(int32(binary.LittleEndian.Uint32(data[3*i:])<<8)) * (1.0 / (1 << 31))
		}
		b := data[3*last:]
		out[last] = float64(int32(uint32(b[0])<<8|uint32(b[1])<<16|uint32(b[2])<<24)) * (1.0 / (1 << 31))
	case f.Bits == 24:
		for i := range out {
			b := data[at : at+3 : at+3]
			v := int32(uint32(b[0])<<8 | uint32(b[1])<<16 | uint32(b[2])<<24)
			out[i] = float64(v) * (1.0 / (1 << 31))
			at += width
		}
	default:
		for i := range out {
			out[i] = float64(int32(binary.LittleEndian.Uint32(data[at:]))) * (1.0 / (1 << 31))
			at += width
		}
	}
	return -1
}

func parse(file string, data []byte) (f Format, start, size int, err error) {
	if len(data) < 12 || string(data[:4]) != "RIFF" || string(data[8:12]) != "WAVE" {
		return f, 0, 0, &Error{file, 0, "it is no WAV file", "give a RIFF/WAVE file with PCM or float samples"}
	}
	at := 12
	known := false
	for at+8 <= len(data) {
		id, length := string(data[at:at+4]), int(binary.LittleEndian.Uint32(data[at+4:]))
		body := at + 8
		switch id {
		case "fmt ":
			if f, err = parseFormat(file, data, body, length); err != nil {
				return f, 0, 0, err
			}
			known = true
		case "data":
			if !known {
				return f, 0, 0, &Error{file, at, "samples come before their format", "give a well-formed WAV file"}
			}
			width := f.Bits / 8 * f.Channels
			if body+length > len(data) {
				missing := (body + length - len(data) + width - 1) / width
				return f, 0, 0, &Error{file, len(data), fmt.Sprintf("it is cut short: %d of %d frames are missing", missing, length/width), "copy it again from its origin, or record it again"}
			}
			return f, body, length - length%width, nil
		}
		at = body + length + length%2
	}
	what := "it has no samples"
	if !known {
		what = "it has no format"
	}
	return f, 0, 0, &Error{file, len(data), what, "it may be cut short: copy it again, or record it again"}
}

func parseFormat(file string, data []byte, body, length int) (Format, error) {
	if length < 16 || body+length > len(data) {
		return Format{}, &Error{file, body, "its format is cut short", "copy it again, or record it again"}
	}
	code := int(binary.LittleEndian.Uint16(data[body:]))
	f := Format{
		Channels: int(binary.LittleEndian.Uint16(data[body+2:])),
		Rate:     int(binary.LittleEndian.Uint32(data[body+4:])),
		Bits:     int(binary.LittleEndian.Uint16(data[body+14:])),
	}
	if code == codeExtensible && length >= 26 {
		code = int(binary.LittleEndian.Uint16(data[body+24:]))
	}
	f.Float = code == codeFloat
	ok := code == codePCM && (f.Bits == 16 || f.Bits == 24 || f.Bits == 32) || f.Float && f.Bits == 32
	if !ok || f.Channels < 1 || f.Rate < 1 {
		return f, &Error{file, body, fmt.Sprintf("its format is not known (code %d, %d bit, %d channels, %d Hz)", code, f.Bits, f.Channels, f.Rate), "give PCM of 16, 24 or 32 bit, or float of 32 bit"}
	}
	return f, nil
}

// Encode writes channels of equal length. Values beyond full scale are held at it.
func Encode(f Format, channels [][]float64) ([]byte, error) {
	if len(channels) != f.Channels || f.Channels == 0 {
		return nil, fmt.Errorf("wav: %d channels given and %d announced", len(channels), f.Channels)
	}
	frames := len(channels[0])
	width := f.Bits / 8 * f.Channels
	size := frames * width
	out := make([]byte, 44+size+size%2)
	copy(out, "RIFF")
	binary.LittleEndian.PutUint32(out[4:], uint32(len(out)-8))
	copy(out[8:], "WAVEfmt ")
	binary.LittleEndian.PutUint32(out[16:], 16)
	code := uint16(codePCM)
	if f.Float {
		code = codeFloat
	}
	binary.LittleEndian.PutUint16(out[20:], code)
	binary.LittleEndian.PutUint16(out[22:], uint16(f.Channels))
	binary.LittleEndian.PutUint32(out[24:], uint32(f.Rate))
	binary.LittleEndian.PutUint32(out[28:], uint32(f.Rate*width))
	binary.LittleEndian.PutUint16(out[32:], uint16(width))
	binary.LittleEndian.PutUint16(out[34:], uint16(f.Bits))
	copy(out[36:], "data")
	binary.LittleEndian.PutUint32(out[40:], uint32(size))
	for c, x := range channels {
		if len(x) != frames {
			return nil, fmt.Errorf("wav: channel %d holds %d frames and channel 1 %d", c+1, len(x), frames)
		}
		at := 44 + c*f.Bits/8
		for _, v := range x {
			put(out[at:], v, f)
			at += width
		}
	}
	return out, nil
}

func put(b []byte, v float64, f Format) {
	if f.Float {
		binary.LittleEndian.PutUint32(b, math.Float32bits(float32(v)))
		return
	}
	top := math.Ldexp(1, f.Bits-1)
	k := int64(math.RoundToEven(math.Max(-top, math.Min(top-1, v*top))))
	for i := range f.Bits / 8 {
		b[i] = byte(k >> (8 * i))
	}
}
