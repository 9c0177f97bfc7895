package ink

import (
	"fmt"
	"strings"
	"sync"
	"unicode"
	"unicode/utf8"

	"golang.org/x/image/font"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/goregular"
	"golang.org/x/image/font/opentype"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
	"golang.org/x/text/unicode/norm"
)

// Face is one of the two faces of the Go fonts that sheets are set in.
type Face uint8

// The faces.
const (
	Regular Face = iota
	Bold
)

// Ascent and Descent are how far the faces reach above and below the base line, as
// fractions of the size: the tallest capital with its accent, the deepest tail.
const (
	Ascent  = 0.78
	Descent = 0.22
)

var faceBytes = [...][]byte{Regular: goregular.TTF, Bold: gobold.TTF}

// loaded is a parsed face with the advance of every character it can draw, in ems.
type loaded struct {
	font    *opentype.Font
	advance map[rune]float64
}

var loadFaces = sync.OnceValue(func() (faces [2]loaded) {
	for i, data := range faceBytes {
		f, err := opentype.Parse(data)
		if err != nil {
			panic("ink: the built-in Go font cannot be read: " + err.Error())
		}
		faces[i] = loaded{f, advances(f)}
	}
	return faces
})

func advances(f *opentype.Font) map[rune]float64 {
	var buf sfnt.Buffer
	em := fixed.Int26_6(f.UnitsPerEm())
	m := make(map[rune]float64, 700)
	for r := rune(' '); r < unicode.ReplacementChar; r++ {
		if unicode.In(r, unicode.Cc, unicode.Cf, unicode.Co, unicode.Cs, unicode.Mn) {
			continue // cannot be seen, or joins what stands before it
		}
		g, err := f.GlyphIndex(&buf, r)
		if err != nil || g == 0 {
			continue
		}
		if a, err := f.GlyphAdvance(&buf, g, em, font.HintingNone); err == nil {
			m[r] = float64(a) / float64(em)
		}
	}
	return m
}

// Font is the parsed face.
func (f Face) Font() *opentype.Font { return loadFaces()[f].font }

// Has tells whether the face can draw a character as itself.
func (f Face) Has(r rune) bool {
	_, ok := loadFaces()[f].advance[r]
	return ok
}

// Width is how long a text is, in points, at a size in points. The faces have no
// kerning, so it is the sum of the characters' advances.
func Width(f Face, size float64, s string) float64 {
	table := loadFaces()[f].advance
	w := 0.0
	for _, r := range s {
		w += table[r]
	}
	return w * size
}

// Printable makes a text that both faces can draw: composed (NFC), white space as
// single spaces, and each character that a face lacks, or that cannot be seen, as its
// number: \u{4E2D}.
func Printable(s string) string {
	var b strings.Builder
	space := false
	for _, r := range norm.NFC.String(s) {
		if unicode.IsSpace(r) {
			space = b.Len() > 0
			continue
		}
		if space {
			b.WriteByte(' ')
			space = false
		}
		if Regular.Has(r) && Bold.Has(r) {
			b.WriteRune(r)
		} else {
			fmt.Fprintf(&b, `\u{%04X}`, r)
		}
	}
	return b.String()
}

// Wrap breaks a printable text into lines no wider than width points, between words
// where it can and within a word where that alone is too wide.
func Wrap(s string, f Face, size, width float64) []string {
	var lines []string
	line, long := "", 0.0 // long is the line's width
	space := Width(f, size, " ")
	for _, word := range strings.Fields(s) {
		w := Width(f, size, word)
		if line != "" && long+space+w <= width {
			line += " " + word
			long += space + w
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		for w > width {
			head := fitting(word, f, size, width)
			lines = append(lines, head)
			word = word[len(head):]
			w = Width(f, size, word)
		}
		line, long = word, w
	}
	if line != "" {
		lines = append(lines, line)
	}
	return lines
}

// fitting is the longest beginning of a word that fits, one character at least.
func fitting(word string, f Face, size, width float64) string {
	end, long := 0, 0.0
	for _, r := range word {
		long += Width(f, size, string(r))
		if end > 0 && long > width {
			break
		}
		end += utf8.RuneLen(r)
	}
	return word[:end]
}

// Shorten cuts wrapped lines to at most n and ends the last with an ellipsis; cut
// tells whether anything was left out.
func Shorten(lines []string, n int, f Face, size, width float64) (short []string, cut bool) {
	if len(lines) <= n {
		return lines, false
	}
	short = append([]string(nil), lines[:n]...)
	last := []rune(short[n-1])
	for len(last) > 0 && Width(f, size, string(last)+"…") > width {
		last = last[:len(last)-1]
	}
	short[n-1] = strings.TrimRight(string(last), " ") + "…"
	return short, true
}
