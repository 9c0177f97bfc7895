package reports

import (
	"fmt"
	"image/color"

	"github.com/boombuler/barcode"
	"github.com/boombuler/barcode/qr"

	"lotgate/reports/ink"
)

// square is a QR code of a text, nil for an empty one.
func square(text string) (barcode.Barcode, error) {
	if text == "" {
		return nil, nil
	}
	code, err := qr.Encode(text, qr.M, qr.Auto)
	if err != nil {
		return nil, fmt.Errorf("certificate: a code of %d bytes cannot be drawn: %w: shorten it to 200 characters or fewer", len(text), err)
	}
	return code, nil
}

// drawSquare draws a code into a square box, each run of dark modules in a row as one
// rectangle of a single path. The four modules of quiet around it are the caller's.
func drawSquare(s ink.Surface, code barcode.Barcode, box ink.Box) {
	b := code.Bounds()
	m := box.W / float64(b.Dx())
	dark := func(x, y int) bool { return color.GrayModel.Convert(code.At(x, y)).(color.Gray).Y < 128 }
	var p ink.Path
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			if !dark(x, y) {
				continue
			}
			run := x
			for run < b.Max.X && dark(run, y) {
				run++
			}
			p.Rect(ink.Box{X: box.X + m*float64(x-b.Min.X), Y: box.Y + m*float64(y-b.Min.Y), W: m * float64(run-x), H: m})
			x = run
		}
	}
	s.Fill(p, ink.Color{})
}
