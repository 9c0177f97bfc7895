// Package reports is paper: the certificate of a unit, with the rings and rulers that
// pages show too. It knows nothing of hardware or of how an attempt came about.
package reports

import (
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"time"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// Certificate is all that a unit's certificate says.
type Certificate struct {
	Serial, Lot             string
	Supplier, Part          string // empty where not known
	Station, Nest, Operator string
	Time                    time.Time // end of the attempt; printed in UTC, decides the file's bytes
	Attempt                 int       // 1 for the unit's first attempt in its lot
	Plan, Limits            Source

	Verdict limits.Verdict
	Reason  string
	Rows    []Row

	Noise    *chart.Noise // nil where none was measured
	Response *chart.Curve // nil where none was measured

	Calibrations []Calibration
	Warnings     []string // what a reader must know before the numbers, such as an overdue calibration
	Virtual      bool     // measured on the virtual bench

	Code string // what the square code holds and the text under it says; empty for no code
}

// Source is a file the attempt was run or judged by.
type Source struct {
	Name     string
	Revision int
	SHA256   string // hexadecimal, of the file's bytes
}

// Row is one reading.
type Row struct {
	Name                  string // "noise_floor.band"
	Label                 string // "Noise in the band"
	Unit                  string // SI symbol without prefix: "A", "V/√Hz"
	Value                 float64
	U                     float64  // expanded, at 95 %, in Unit
	Lower, Upper, Nominal *float64 // in Unit; nil where open
	Simple                bool     // judged without the uncertainty: no guard bands
	Curve                 bool     // the response against its mask: the numbers are taken from its decisive point
	Verdict               limits.Verdict
	Reason                string
	Missing               string // sentence in place of a number
	Notes                 []string
}

// Calibration is one calibration the numbers rest on.
type Calibration struct {
	What      string // "full scale of input if"
	Value, U  float64
	Unit      string // SI symbol of Value and U
	Date, Due string // RFC 3339 full-date
	Overdue   bool
}

// VirtualWarning is what a certificate from the virtual bench says.
const VirtualWarning = "measured on the virtual bench: no evidence of a real unit"

// Cautions are the sentences every certificate ends with.
func Cautions() []string {
	return []string{
		"This is a goods-in record of one unit. It is no type approval and no declaration of conformity.",
		"The module radiates when powered. Radio rules for these bands differ by country, and so does exposure guidance: follow local codes and a qualified person's word.",
		"On the bench the shaker and the supply can hurt: keep hands off until both are off.",
		"The module is sensitive to electrostatic discharge (ESD): handle it earthed and keep it in its protective bag.",
	}
}

// WriteCertificate writes the certificate as a PDF of one A4 page. The same certificate
// gives the same bytes. What is said at
// such length that the page cannot hold it is cut there with a note, and stands whole in
// the file's Subject. It gives an error where the code is too long to be
// drawn, where there are more readings than a page holds (about thirty), where serial
// number or time are missing, or where w fails.
func WriteCertificate(w io.Writer, c Certificate) error {
	if c.Serial == "" || c.Time.IsZero() {
		return errors.New("certificate: serial number or time is missing: give both, else it is evidence of nothing")
	}
	page, err := layOut(c)
	if err != nil {
		return err
	}
	pdf := ink.NewPDF(ink.Facts{
		Title:   fmt.Sprintf("Certificate of unit %s: %s", c.Serial, word(c.Verdict)),
		Subject: c.subject(page.cut),
		Created: c.Time,
	})
	page.Play(pdf)
	if err := pdf.Output(w); err != nil {
		return fmt.Errorf("certificate of unit %s: %w", c.Serial, err)
	}
	return nil
}

// subject is the unit's reason, and what is said of each reading where the page had to
// cut something.
func (c Certificate) subject(cut bool) string {
	text := c.Reason
	if !cut {
		return text
	}
	for _, r := range c.Rows {
		if remark := r.remark(); remark != "" {
			text += "\n" + r.Name + ": " + remark
		}
	}
	return text
}

// word is the verdict as a reader meets it.
func word(v limits.Verdict) string {
	if v == limits.None {
		return "not judged"
	}
	return string(v)
}

// known tells whether the row has a number.
func (r Row) known() bool {
	return r.Missing == "" && r.Verdict != limits.Void && !math.IsNaN(r.Value)
}

func (r Row) unit() quantity.Unit {
	if u, ok := quantity.UnitBySymbol(r.Unit); ok {
		return u
	}
	return quantity.Unit{Symbol: r.Unit}
}

// valueText is the number with its uncertainty, in as many digits as that earns.
func (r Row) valueText() string {
	switch {
	case r.known():
	case r.Curve && r.Verdict != limits.Void && r.Missing == "":
		return "a curve"
	default:
		return "no number"
	}
	return minus(quantity.PrintWith(r.Value, r.U, r.unit()))
}

// limitsText is what the reading must be.
func (r Row) limitsText() string {
	switch {
	case r.Lower != nil && r.Upper != nil:
		return minus(r.bound(*r.Lower) + " … " + r.bound(*r.Upper))
	case r.Upper != nil:
		return minus("at most " + r.bound(*r.Upper))
	case r.Lower != nil:
		return minus("at least " + r.bound(*r.Lower))
	}
	return "no limits"
}

// remark is all that is said of the reading in words, each sentence once.
func (r Row) remark() string {
	said := r.Reason
	for _, s := range append([]string{r.Missing}, r.Notes...) {
		if s != "" && !strings.Contains(said, s) {
			if said != "" {
				said += "; "
			}
			said += s
		}
	}
	return minus(said)
}

// minus sets a true minus before a digit where a word would begin.
func minus(s string) string {
	runes := []rune(s)
	for i, r := range runes {
		starts := i == 0 || runes[i-1] == ' ' || runes[i-1] == '('
		if r == '-' && starts && i+1 < len(runes) && runes[i+1] >= '0' && runes[i+1] <= '9' {
			runes[i] = '−'
		}
	}
	return string(runes)
}

// decided gives a curve's row the numbers of the point that decides: the one with the
// worst verdict, among those the one nearest to its bound; without such a point, no
// number. Other rows are left as they are.
func (r Row) decided(c *chart.Curve) (Row, quantity.Frequency) {
	if !r.Curve {
		return r, 0
	}
	r.Value = math.NaN()
	if c == nil {
		return r, 0
	}
	rank := map[limits.Verdict]int{limits.Pass: 1, limits.Marginal: 2, limits.Fail: 3}
	worst := -1
	for i, p := range c.Points {
		if p.Lower == nil && p.Upper == nil {
			continue
		}
		if worst < 0 || rank[p.Verdict] > rank[c.Points[worst].Verdict] ||
			rank[p.Verdict] == rank[c.Points[worst].Verdict] && inside(p) < inside(c.Points[worst]) {
			worst = i
		}
	}
	if worst < 0 {
		return r, 0
	}
	p := c.Points[worst]
	r.Unit, r.Value, r.U = "dB", float64(p.Level), float64(p.U)
	r.Lower, r.Upper = (*float64)(p.Lower), (*float64)(p.Upper)
	return r, p.Frequency
}

// inside is how far a point lies within its nearest bound, in dB; negative outside.
func inside(p chart.ResponsePoint) quantity.Decibel {
	switch {
	case p.Lower == nil:
		return *p.Upper - p.Level
	case p.Upper == nil:
		return p.Level - *p.Lower
	}
	return min(*p.Upper-p.Level, p.Level-*p.Lower)
}

// bound prints a limit; one that was read off a mask between two corners in hundredths of
// a dB.
func (r Row) bound(v float64) string {
	if r.Curve {
		v = math.Round(v*100) / 100
	}
	return quantity.Print(v, r.unit())
}
