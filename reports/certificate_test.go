package reports

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os/exec"
	"strings"
	"sync"
	"testing"
	"time"

	"lotgate/limits"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

func write(t testing.TB, c Certificate) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := WriteCertificate(&b, c); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestTheSameCertificateGivesTheSameBytesOnOnePage(t *testing.T) {
	twice := map[string]bool{"void": true, "long-names": true, "fourteen-readings": true}
	for name, c := range samples() {
		b := write(t, c)
		if !bytes.HasPrefix(b, []byte("%PDF-1.")) || !bytes.Contains(b, []byte("/Count 1\n")) {
			t.Errorf("%s: the file is no PDF of one page", name)
		}
		if twice[name] && !bytes.Equal(b, write(t, c)) {
			t.Errorf("%s: written again, the bytes differ", name)
		}
	}
	a, b := sample(limits.Pass), sample(limits.Pass)
	b.Time = b.Time.Add(time.Second)
	if bytes.Equal(write(t, a), write(t, b)) {
		t.Error("another time gave the same bytes")
	}
}

// TestNothingOverlapsOrIsCut looks at every text of every sample where it stands.
func TestNothingOverlapsOrIsCut(t *testing.T) {
	page := ink.Box{X: leftEdge, Y: topEdge, W: fullWidth, H: bottomEdge - topEdge}
	for name := range samples() {
		s := laidOut(t, name)
		var texts []ink.Mark
		for _, m := range s.Marks {
			if m.Written == nil {
				if b := m.Bounds(); !page.Holds(b, 2) {
					t.Errorf("%s: a mark of %s at %.1f leaves the page", name, m.Block, b)
				}
				continue
			}
			texts = append(texts, m)
			w := m.Written
			if w.Size < smallest {
				t.Errorf("%s: %q is set in %.2f pt", name, w.S, w.Size)
			}
			if !page.Holds(m.Bounds(), 3) {
				t.Errorf("%s: %q at %.1f leaves the page", name, w.S, m.Bounds())
			}
			for _, r := range w.S {
				if !w.Face.Has(r) {
					t.Errorf("%s: %q holds %U, which would print as a box", name, w.S, r)
				}
			}
		}
		for i, a := range texts {
			for _, b := range texts[i+1:] {
				if a.Bounds().Overlaps(b.Bounds(), 0.4) {
					t.Errorf("%s: %q (%s) at %.1f overlaps %q (%s) at %.1f", name, a.Written.S, a.Block, a.Bounds(), b.Written.S, b.Block, b.Bounds())
				}
			}
		}
		for _, m := range s.Marks {
			if m.Written != nil || m.Block == "warnings" || strings.HasPrefix(m.Block, "chart") {
				continue // a warning stands on its panel; charts write beside their axes
			}
			for _, w := range texts {
				if w.Bounds().Overlaps(m.Bounds(), 1.3) {
					t.Errorf("%s: %q (%s) at %.1f is struck by a mark of %s at %.1f", name, w.Written.S, w.Block, w.Bounds(), m.Block, m.Bounds())
				}
			}
		}
	}
}

// TestOverlapIsSeen makes the look of TestNothingOverlapsOrIsCut fail where it must.
func TestOverlapIsSeen(t *testing.T) {
	s := &sheet{style: styles[0]}
	s.lines([]string{"first"}, 50, 50, 9, ink.Regular, chart.Ink)
	s.lines([]string{"second"}, 55, 55, 9, ink.Regular, chart.Ink)
	if !s.Marks[0].Bounds().Overlaps(s.Marks[1].Bounds(), 0.4) {
		t.Error("two texts in one place are not seen to overlap")
	}
}

// laidOut is a sample's page; each is set once only.
func laidOut(t *testing.T, name string) *sheet {
	t.Helper()
	laid.Lock()
	defer laid.Unlock()
	if laid.pages[name] == nil {
		s, err := layOut(samples()[name])
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		laid.pages[name] = s
	}
	return laid.pages[name]
}

var laid = struct {
	sync.Mutex
	pages map[string]*sheet
}{pages: map[string]*sheet{}}

// pageText is all the page says, blocks in order, lines joined by spaces.
func pageText(t *testing.T, c Certificate) string {
	t.Helper()
	s, err := layOut(c)
	if err != nil {
		t.Fatal(err)
	}
	return textOf(s)
}

func textOf(s *sheet) string {
	var words []string
	for _, m := range s.Marks {
		if m.Written != nil {
			words = append(words, m.Written.S)
		}
	}
	return strings.Join(words, " ")
}

func TestEachCautionIsOnEachPage(t *testing.T) {
	if len(Cautions()) < 4 {
		t.Fatal("a caution is missing")
	}
	all := strings.Join(Cautions(), " ")
	for _, need := range []string{"goods-in record", "no type approval", "radiates", "differ by country", "exposure guidance", "local codes", "qualified person", "shaker and the supply can hurt", "(ESD)"} {
		if !strings.Contains(all, need) {
			t.Errorf("no caution speaks of %q", need)
		}
	}
	for name := range samples() {
		text := textOf(laidOut(t, name))
		for _, caution := range Cautions() {
			if !strings.Contains(text, caution) {
				t.Errorf("%s: the caution %q is missing", name, caution)
			}
		}
	}
}

func TestThePageSaysWhatMatters(t *testing.T) {
	c := sample(limits.Marginal)
	c.Virtual = true
	text := pageText(t, c)
	for _, need := range []string{
		"marginal", "MM10-2431-0417", "2026-W31-A", "Nordwelle Bauteile", "MM10 rev C", "goods-in 2", "K. Amsel",
		"2026-08-03 09:41:27 UTC", "motion module, goods-in, revision 3", strings.Repeat("3f9a0c52", 8), strings.Repeat("b71e44d0", 8),
		VirtualWarning, "calibration overdue: target at 40 Hz was due on 2026-07-30",
		"31.02 mA ± 0.14 mA", "22 mA … 40 mA", "at most 5 µV", "at least 800 Hz", "4.93 µV ± 0.21 µV",
		"supply current 31.02 mA, inside by 8.98 mA (at most 40 mA)", "not judged",
		"IF noise in nV/√Hz", "IF response in dB, 0 dB at 80 Hz", "10 Hz", "100 Hz", "1 kHz",
		"target at 40 Hz: 512.0 µm/V ± 6.0 µm/V, 2026-05-04, overdue since 2026-07-30", "lotgate:0198f2c4-7b1e-7d53-9a41-5c0e8f1b2a77",
	} {
		if !strings.Contains(text, need) {
			t.Errorf("the page does not say %q", need)
		}
	}
	if void := pageText(t, sample(limits.Void)); strings.Contains(void, "0 A") || strings.Count(void, "no number") != 8 {
		t.Error("a void reading must show no number")
	}
}

func TestLongReasonsStayReadable(t *testing.T) {
	long := samples()["long-reasons"]
	if text := textOf(laidOut(t, "long-reasons")); !strings.Contains(text, minus(long.Reason)) {
		t.Error("a long reason is not whole on the page")
	}
	tooLong := samples()["too-long-reasons"]
	s := laidOut(t, "too-long-reasons")
	if !s.cut {
		t.Fatal("this reason cannot be on the page as a whole")
	}
	subject := tooLong.subject(s.cut)
	for _, r := range append([]Row{{Reason: tooLong.Reason}}, tooLong.Rows...) {
		if !strings.Contains(subject, r.Reason) {
			t.Errorf("the file's subject lacks %.40q…", r.Reason)
		}
	}
	for _, need := range []string{"characters, stands in this file's Subject", "stands whole in this file's Subject", "charts of noise and response were left out"} {
		if !strings.Contains(textOf(s), need) {
			t.Errorf("the page does not say %q", need)
		}
	}
	if got := sample(limits.Pass).subject(false); got != "all 7 judged readings are inside their limits" {
		t.Errorf("subject %q", got)
	}
}

func TestThreeToFourteenReadingsKeepTheirCharts(t *testing.T) {
	for _, n := range []int{3, 4, 6, 9, 12, 14} {
		if text := pageText(t, many(n)); !strings.Contains(text, "IF response in dB") || strings.Contains(text, "left out") {
			t.Errorf("%d readings: the charts are missing", n)
		}
	}
}

func TestMoreReadingsThanAPageHoldsAreAnError(t *testing.T) {
	err := WriteCertificate(&bytes.Buffer{}, many(90))
	if err == nil || !strings.Contains(err.Error(), "unit MM10-2431-0417: 90 readings") || !strings.Contains(err.Error(), "split it") {
		t.Errorf("got %v", err)
	}
	if err := WriteCertificate(&bytes.Buffer{}, many(30)); err != nil {
		t.Errorf("30 readings: %v", err)
	}
}

func TestCertificatesMayBeWrittenAtOnce(t *testing.T) {
	want := write(t, sample(limits.Fail))
	var all sync.WaitGroup
	for range 2 {
		all.Go(func() {
			var b bytes.Buffer
			if err := WriteCertificate(&b, sample(limits.Fail)); err != nil || !bytes.Equal(b.Bytes(), want) {
				t.Errorf("beside others, the bytes differ (error %v)", err)
			}
		})
	}
	all.Wait()
}

type fullDisk struct{}

func (fullDisk) Write([]byte) (int, error) { return 0, errors.New("no space left") }

func TestErrorsSayWhatAndWhere(t *testing.T) {
	c := sample(limits.Pass)
	if err := WriteCertificate(fullDisk{}, c); err == nil || err.Error() != "certificate of unit MM10-2431-0417: writing the PDF: no space left" {
		t.Errorf("full disk: %v", err)
	}
	for _, missing := range []Certificate{{}, {Serial: "1"}, {Time: c.Time}} {
		var b bytes.Buffer
		if err := WriteCertificate(&b, missing); err == nil || !strings.Contains(err.Error(), "is missing: give both") || b.Len() > 0 {
			t.Errorf("nothing to go by: %v", err)
		}
	}
	c.Code = strings.Repeat("x", 4000)
	if err := WriteCertificate(&bytes.Buffer{}, c); err == nil || !strings.Contains(err.Error(), "a code of 4000 bytes") {
		t.Errorf("long code: %v", err)
	}
	c = sample(limits.Pass)
	c.Noise = &chart.Noise{Spectrum: make([]chart.NoisePoint, 5)}
	if err := WriteCertificate(&bytes.Buffer{}, c); err == nil || !strings.Contains(err.Error(), "0 of 5 points are above zero") {
		t.Errorf("silent spectrum: %v", err)
	}
}

func TestDecidingPointOfACurve(t *testing.T) {
	c := sampleCurve(430)
	r, at := Row{Curve: true}.decided(c)
	last := c.Points[len(c.Points)-1]
	if at != last.Frequency || r.Value != float64(last.Level) || *r.Lower != -6 || r.Unit != "dB" {
		t.Errorf("the deciding point is at %v with %g dB", at, r.Value)
	}
	for _, none := range []*chart.Curve{nil, {}, {Points: []chart.ResponsePoint{{Frequency: 10}}}} {
		if r, at := (Row{Curve: true}).decided(none); at != 0 || r.known() || r.valueText() != "a curve" {
			t.Errorf("without a bounded point the row says %q", r.valueText())
		}
	}
	if r, at := (Row{Value: 3}).decided(c); at != 0 || r.Value != 3 {
		t.Error("a single number has no deciding point")
	}
	lower, upper := sampleMask.At(500)
	p := chart.ResponsePoint{Level: -3, Lower: level(*lower)}
	if d := float64(inside(p)); math.Abs(d-(-3-*lower)) > 1e-12 {
		t.Errorf("inside a lower bound by %g", d)
	}
	p = chart.ResponsePoint{Level: -3, Upper: level(*upper)}
	if d := float64(inside(p)); d != 4 {
		t.Errorf("inside an upper bound of 1 dB by %g", d)
	}
}

func TestMinus(t *testing.T) {
	for in, want := range map[string]string{
		"-3 dB": "−3 dB", "at least -3 dB (-1)": "at least −3 dB (−1)", "MM10-2431": "MM10-2431", "2026-08-03": "2026-08-03", "-": "-", "a - b": "a - b",
	} {
		if got := minus(in); got != want {
			t.Errorf("minus(%q) = %q, want %q", in, got, want)
		}
	}
}

func TestTheSquareHoldsTheCodesModules(t *testing.T) {
	code, err := square("lotgate:0198f2c4")
	if err != nil {
		t.Fatal(err)
	}
	n := code.Bounds().Dx()
	var r ink.Recording
	drawSquare(&r, code, ink.Box{X: 7, Y: 9, W: float64(n) * 2, H: float64(n) * 2})
	dark := map[[2]int]bool{}
	for i := 0; i < len(r.Marks[0].Path); i += 5 {
		b := r.Marks[0].Path[i : i+5].Bounds()
		for k := range int(math.Round(b.W / 2)) {
			dark[[2]int{int(math.Round((b.X-7)/2)) + k, int(math.Round((b.Y - 9) / 2))}] = true
		}
	}
	for y := range n {
		for x := range n {
			grey, _, _, _ := code.At(x, y).RGBA()
			if dark[[2]int{x, y}] != (grey < 0x8000) {
				t.Fatalf("module %d, %d is wrong", x, y)
			}
		}
	}
}

// TestTextCanBeTakenOut asks a tool that is not ours what it reads on the page.
func TestTextCanBeTakenOut(t *testing.T) {
	tool, err := exec.LookPath("pdftotext")
	if err != nil {
		t.Skip("pdftotext is not installed: the page's text is checked where it is set only")
	}
	cmd := exec.Command(tool, "-layout", "-", "-")
	cmd.Stdin = bytes.NewReader(write(t, sample(limits.Fail)))
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	for _, need := range []string{"fail", "MM10-2431-0417", "73.4 nV/√Hz ± 4.1 nV/√Hz", VirtualWarning, "1 kHz"} {
		if !strings.Contains(string(out), need) {
			t.Errorf("the text lacks %q", need)
		}
	}
}

func BenchmarkWriteCertificate(b *testing.B) {
	c := sample(limits.Fail)
	size := 0
	for b.Loop() {
		size = len(write(b, c))
	}
	b.ReportMetric(float64(size)/1024, "kB")
}

func ExampleRingSVG() {
	fmt.Println(RingSVG(limits.Fail, 20))
	// Output:
	// <svg xmlns="http://www.w3.org/2000/svg" width="20" height="20" viewBox="0 0 20 20" role="img" aria-label="fail">
	// <title>fail</title>
	// <path d="M18.7 10C18.7 14.805 14.805 18.7 10 18.7C5.195 18.7 1.3 14.805 1.3 10C1.3 5.195 5.195 1.3 10 1.3C14.805 1.3 18.7 5.195 18.7 10Z" fill="none" stroke="#D55E00" stroke-width="2.6" stroke-linejoin="round"/>
	// <path d="M3.848 16.152L16.152 3.848" fill="none" stroke="#D55E00" stroke-width="2.6" stroke-linejoin="round"/>
	// </svg>
}
