package record

import (
	"bytes"
	"context"
	"encoding/csv"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
	"time"

	"lotgate/limits"
	"lotgate/station/measure"
)

func attempt(serial string, n int, v limits.Verdict) *Attempt {
	value := 0.031 + float64(n)*1e-5
	lower := 0.022
	return &Attempt{ID: NewID(), Lot: "L/1", Serial: serial, Station: "s", Nest: "1", Operator: "ann", Started: time.Unix(1.7e9+int64(n), 123456789).UTC(), Ended: time.Unix(1.7e9+int64(n)+20, 0).UTC(),
		Verdict: v, Reason: "because, it \"is\" so\nreally", Files: []SourceFile{{"plan", "plan.yaml", hashOf([]byte("plan")), []byte("plan")}},
		Readings: []Judged{{Reading: measure.Reading{Name: "supply_current", Unit: "A", Value: value, Budget: measure.Combine(measure.Component{Source: "x", U: 1e-4})}, Lower: &lower, Verdict: v},
			{Reading: measure.Reading{Name: "response.curve", Unit: "dB", Curve: true}, Points: []JudgedPoint{{FrequencyHz: 10, Value: -0.1, Expanded: 0.2}}}}}
}

func open(t *testing.T) *Store {
	t.Helper()
	s, err := Open(context.Background(), filepath.Join(t.TempDir(), "store"))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

func all(t *testing.T, s *Store, f Filter) []*Attempt {
	t.Helper()
	var out []*Attempt
	if err := s.Attempts(context.Background(), f, func(a *Attempt) bool { out = append(out, a); return true }); err != nil {
		t.Fatal(err)
	}
	return out
}

func TestAttemptComesBackWhole(t *testing.T) {
	s := open(t)
	a := attempt("A1", 1, limits.Pass)
	if err := s.Save(context.Background(), a); err != nil {
		t.Fatal(err)
	}
	if a.Number != 1 {
		t.Errorf("number %d", a.Number)
	}
	got := all(t, s, Filter{ID: a.ID})
	if len(got) != 1 {
		t.Fatalf("%d attempts", len(got))
	}
	want := *a
	want.Files = append([]SourceFile(nil), a.Files...)
	want.Files[0].Content = nil // kept once, by its hash
	if !reflect.DeepEqual(got[0], &want) {
		t.Errorf("came back as\n%+v\nwas\n%+v", got[0], &want)
	}
	content, err := s.Content(context.Background(), a.Files[0].SHA256)
	if err != nil || string(content) != "plan" {
		t.Errorf("content %q, %v", content, err)
	}
	if f := Fingerprint(got[0]); f != Fingerprint(a) || len(f) != 19 {
		t.Errorf("code %q became %q", Fingerprint(a), f)
	}
	got[0].Readings[0].Value += 1e-9
	if Fingerprint(got[0]) == Fingerprint(a) {
		t.Error("a changed number keeps its code")
	}
	if err := s.Save(context.Background(), a); err == nil {
		t.Error("the same attempt was saved twice")
	}
	if n := len(all(t, s, Filter{})); n != 1 {
		t.Errorf("%d attempts after a refused save", n)
	}
}

func TestYieldCountsFirstValidAttempts(t *testing.T) {
	s := open(t)
	n := 0
	add := func(serial string, verdicts ...limits.Verdict) {
		for _, v := range verdicts {
			n++
			if err := s.Save(context.Background(), attempt(serial, n, v)); err != nil {
				t.Fatal(err)
			}
		}
	}
	add("a", limits.Pass)
	add("b", limits.Void, limits.Pass)     // the void does not count
	add("c", limits.Marginal, limits.Pass) // passed, but not at first
	add("d", limits.Fail)
	add("e", limits.Void)
	y, err := s.Yield(context.Background(), "L/1")
	if err != nil {
		t.Fatal(err)
	}
	want := Yield{Units: 5, Valid: 4, FirstPass: 2, Passed: 3, Failed: 1, NeverValid: 1, VoidRuns: 2, Attempts: 7, FailReasons: map[string]int{"supply_current": 1}}
	if !reflect.DeepEqual(y, want) {
		t.Errorf("%+v, want %+v", y, want)
	}
}

// TestYieldLogIsTheStore: the log that grew row by row and the one written again from the store
// are the same bytes, and RFC 4180 readers get every field back.
func TestYieldLogIsTheStore(t *testing.T) {
	s := open(t)
	y := YieldLog{s}
	for i, serial := range []string{"A1", "A,2", `A"3`, "=A4", "Ä5"} {
		a := attempt(serial, i, limits.Pass)
		if i == 3 { // a new reading needs a new column
			a.Readings = append(a.Readings, Judged{Reading: measure.Reading{Name: "startup", Unit: "s", Value: 0.5}})
		}
		if err := s.Save(context.Background(), a); err != nil {
			t.Fatal(err)
		}
		if note, err := y.Append(context.Background(), a); err != nil || note != "" {
			t.Fatalf("%q, %v", note, err)
		}
	}
	grown, err := os.ReadFile(y.Path("L/1"))
	if err != nil {
		t.Fatal(err)
	}
	if err := y.Rebuild(context.Background(), "L/1"); err != nil {
		t.Fatal(err)
	}
	rebuilt, _ := os.ReadFile(y.Path("L/1"))
	if !bytes.Equal(grown, rebuilt) {
		t.Errorf("the log grew to\n%s\nand is written again as\n%s", grown, rebuilt)
	}
	rows, err := csv.NewReader(bytes.NewReader(grown)).ReadAll()
	if err != nil || len(rows) != 6 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	if rows[4][2] != "=A4" || rows[3][2] != `A"3` || !strings.Contains(strings.Join(rows[0], "|"), "supply_current (A)|U of supply_current (A)") {
		t.Errorf("header %v, row %v", rows[0], rows[4])
	}
	if strings.Contains(strings.Join(rows[0], "|"), "curve") {
		t.Error("a curve has a column")
	}
}

// TestSeveralAttemptsAtOnce: attempts saved together and filed afterwards stand in the log once each,
// without a word about missing rows.
func TestSeveralAttemptsAtOnce(t *testing.T) {
	s := open(t)
	y := YieldLog{s}
	var list []*Attempt
	for i := range 3 {
		a := attempt("A", i, limits.Void)
		if err := s.Save(context.Background(), a); err != nil {
			t.Fatal(err)
		}
		list = append(list, a)
	}
	for _, a := range list {
		if note, err := y.Append(context.Background(), a); note != "" || err != nil {
			t.Errorf("%q, %v", note, err)
		}
	}
	data, _ := os.ReadFile(y.Path("L/1"))
	if rows, err := csv.NewReader(bytes.NewReader(data)).ReadAll(); err != nil || len(rows) != 4 {
		t.Errorf("%d rows, %v", len(rows), err)
	}
}

// TestTornYieldLogIsSetAside cuts the log at every byte of its last row: it is kept aside and
// written again from the store.
func TestTornYieldLogIsSetAside(t *testing.T) {
	s := open(t)
	y := YieldLog{s}
	for i := range 2 {
		a := attempt(fmt.Sprint("A", i), i, limits.Pass)
		if err := s.Save(context.Background(), a); err != nil {
			t.Fatal(err)
		}
		if _, err := y.Append(context.Background(), a); err != nil {
			t.Fatal(err)
		}
	}
	whole, _ := os.ReadFile(y.Path("L/1"))
	last := bytes.LastIndex(whole[:len(whole)-2], []byte("\r\n")) + 2
	for cut := last + 1; cut < len(whole); cut += 7 {
		if err := os.WriteFile(y.Path("L/1"), whole[:cut], 0o644); err != nil {
			t.Fatal(err)
		}
		a := attempt("B", cut, limits.Pass)
		if err := s.Save(context.Background(), a); err != nil {
			t.Fatal(err)
		}
		note, err := y.Append(context.Background(), a)
		if err != nil || note == "" {
			t.Fatalf("cut at %d: note %q, %v", cut, note, err)
		}
		now, _ := os.ReadFile(y.Path("L/1"))
		if !bytes.HasPrefix(now, whole) || !bytes.Contains(now, []byte(a.ID)) {
			t.Fatalf("cut at %d: the log lost something", cut)
		}
		aside, _ := filepath.Glob(y.Path("L/1") + ".torn*")
		if len(aside) == 0 {
			t.Fatalf("cut at %d: nothing was set aside", cut)
		}
	}
}

func TestOpenRefuses(t *testing.T) {
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, DatabaseFile), bytes.Repeat([]byte("no database "), 100), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(context.Background(), dir); err == nil || !strings.Contains(err.Error(), "no store") {
		t.Errorf("a foreign file gave %v", err)
	}
	file := filepath.Join(t.TempDir(), "file")
	if err := os.WriteFile(file, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(context.Background(), filepath.Join(file, "store")); err == nil || !strings.Contains(err.Error(), "folder") {
		t.Errorf("a folder below a file gave %v", err)
	}
	s := open(t)
	if _, err := s.db.Exec("PRAGMA user_version = 99"); err != nil {
		t.Fatal(err)
	}
	s.Close()
	if _, err := Open(context.Background(), s.Dir()); err == nil || !strings.Contains(err.Error(), "version 99") {
		t.Errorf("a newer store gave %v", err)
	}
}

// TestSafeName: any text becomes one harmless file name, and different texts different names.
func TestSafeName(t *testing.T) {
	seen := map[string]string{}
	for _, s := range []string{"A0001", "a/b", "a\\b", "..", ".", "", " ", "a b", "a{20}b", "ä", "CON:", "x\x00y", "../../etc", strings.Repeat("z", 300), strings.Repeat("z", 301), "a.b", ".hidden", "end."} {
		n := SafeName(s)
		if other, twice := seen[n]; twice {
			t.Errorf("%q and %q are both %q", s, other, n)
		}
		seen[n] = s
		if n == "" || len(n) > longestName || strings.ContainsAny(n, `/\: `+"\x00") || strings.HasPrefix(n, ".") || !filepath.IsLocal(n) {
			t.Errorf("%q became %q", s, n)
		}
	}
	if SafeName("A0001-b_2.x") != "A0001-b_2.x" {
		t.Error("a harmless name was changed")
	}
}

func TestWriteNewNeverOverwrites(t *testing.T) {
	path := filepath.Join(t.TempDir(), "c.pdf")
	for i, want := range []string{"c.pdf", "c-2.pdf", "c-3.pdf"} {
		name, err := WriteNew(path, []byte{byte(i)})
		if err != nil || filepath.Base(name) != want {
			t.Fatalf("%s, %v", name, err)
		}
	}
	if data, _ := os.ReadFile(path); data[0] != 0 {
		t.Error("the first file was overwritten")
	}
	if _, err := WriteNew(filepath.Join(t.TempDir(), "no", "c.pdf"), nil); err == nil || !strings.Contains(err.Error(), "cannot be written") {
		t.Errorf("a missing folder gave %v", err)
	}
}

// TestKilledWriterLeavesWholeAttempts kills a process that saves attempts: what the store holds
// afterwards is whole, and includes all whose saving had returned.
func TestKilledWriterLeavesWholeAttempts(t *testing.T) {
	if dir := os.Getenv("LOTGATE_TEST_WRITER"); dir != "" {
		s, err := Open(context.Background(), dir)
		if err != nil {
			panic(err)
		}
		for i := 0; ; i++ {
			if err := s.Save(context.Background(), attempt("A", i, limits.Pass)); err != nil {
				panic(err)
			}
			fmt.Println("saved")
		}
	}
	dir := t.TempDir()
	c := exec.Command(os.Args[0], "-test.run", "^TestKilledWriterLeavesWholeAttempts$")
	c.Env = append(os.Environ(), "LOTGATE_TEST_WRITER="+dir)
	out, err := c.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	var said bytes.Buffer
	buffer := make([]byte, 256)
	for strings.Count(said.String(), "saved") < 25 {
		n, err := out.Read(buffer)
		said.Write(buffer[:n])
		if err != nil {
			t.Fatalf("the writer ended: %v", err)
		}
	}
	if err := c.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	for {
		n, err := out.Read(buffer)
		said.Write(buffer[:n])
		if err != nil {
			break
		}
	}
	_ = c.Wait()
	s, err := Open(context.Background(), dir)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	got := all(t, s, Filter{})
	if saved := strings.Count(said.String(), "saved"); len(got) < saved || len(got) > saved+1 {
		t.Errorf("%d attempts were reported saved, %d are there", saved, len(got))
	}
	for i, a := range got {
		if a.Number != i+1 || len(a.Readings) != 2 {
			t.Fatalf("attempt %d is not whole: %+v", i, a)
		}
	}
}

func TestReadFolderRefuses(t *testing.T) {
	source := filepath.Join("..", "..", "testdata", "captures", "good")
	text, err := os.ReadFile(filepath.Join(source, CaptureFile))
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name, old, new, want string
		damage               func(dir string) error
	}{
		{name: "unknown key", old: "carrier: 10.525", new: "colour: red\ncarrier: 10.525", want: `unknown key "colour"`},
		{name: "key of another measurement", old: "  reference: 85.75 Hz", new: "  reference: 85.75 Hz\n  using: reported", want: `unknown key "using"`},
		{name: "rate differs", old: "sample_rate: 8000 Hz", new: "sample_rate: 44.1 kHz", want: "has a sample rate of 8000 Hz and capture.yaml says 44.1 kHz"},
		{name: "file outside", old: "file: response.wav", new: "file: ../response.wav", want: "lies outside the folder"},
		{name: "file missing", old: "file: response.wav", new: "file: absent.wav", want: "no such file"},
		{name: "channel missing", old: "inputs: {sense: 1}", new: "inputs: {sense: 2}", want: "it has 1 channels and channel 2 was asked for"},
		{name: "floor missing", old: "station_floor: station_floor", new: "station_floor: elsewhere", want: `there is no step "elsewhere"`},
		{name: "step twice", old: "step: noise_floor", new: "step: station_floor", want: "stands here twice"},
		{name: "version", old: "version: 1", new: "version: 7", want: "version 7 is not known"},
		{name: "truncated", damage: func(dir string) error { return os.Truncate(filepath.Join(dir, "response.wav"), 3000) }, want: "it is cut short"},
		{name: "foreign", damage: func(dir string) error {
			return os.WriteFile(filepath.Join(dir, "response.wav"), []byte("ID3 music"), 0o644)
		}, want: "it is no WAV file"},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			if err := os.CopyFS(dir, os.DirFS(source)); err != nil {
				t.Fatal(err)
			}
			if c.old != "" {
				changed := strings.Replace(string(text), c.old, c.new, 1)
				if changed == string(text) {
					t.Fatal("nothing was changed")
				}
				if err := os.WriteFile(filepath.Join(dir, CaptureFile), []byte(changed), 0o644); err != nil {
					t.Fatal(err)
				}
			} else if err := c.damage(dir); err != nil {
				t.Fatal(err)
			}
			_, err := ReadFolder(dir)
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v, want it to say %q", err, c.want)
			}
		})
	}
	if _, err := ReadFolder(t.TempDir()); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("an empty folder gave %v", err)
	}
}
