package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lotgate/station"
)

// lotgate runs the program and gives its status, output and messages.
func lotgate(in string, args ...string) (int, string, string) {
	var out, errs bytes.Buffer
	status := run(context.Background(), args, strings.NewReader(in), &out, &errs)
	return status, out.String(), errs.String()
}

// starterSet is a folder with the starter files.
func starterSet(t *testing.T) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "set")
	if status, _, errs := lotgate("", "init", dir); status != statusPass {
		t.Fatalf("init: %s", errs)
	}
	return dir
}

func testArgs(dir string, more ...string) []string {
	return append([]string{"test", "--station", filepath.Join(dir, "station-virtual.yaml"), "--plan", filepath.Join(dir, "plan.yaml"), "--lot", "L", "--operator", "ann"}, more...)
}

// TestExitStatuses holds every command's status and message to what the help promises.
func TestExitStatuses(t *testing.T) {
	dir := starterSet(t)
	file := func(name string) string { return filepath.Join(dir, name) }
	captures := filepath.Join("..", "..", "testdata", "captures")
	for _, c := range []struct {
		name   string
		args   []string
		status int
		says   string
	}{
		{"no command", nil, statusPass, "Usage"},
		{"unknown command", []string{"sing"}, statusMisuse, `unknown command "sing"`},
		{"unknown option", []string{"demo", "--loud"}, statusMisuse, "unknown flag: --loud"},
		{"too many arguments", []string{"schema", "plan", "limits"}, statusMisuse, "accepts 1 arg"},
		{"unknown schema", []string{"schema", "song"}, statusMisuse, "one of plan, limits, station, driver"},
		{"test without lot", []string{"test"}, statusMisuse, "needs --lot and --operator"},
		{"init on top", []string{"init", dir}, statusVoid, "exists already: name an empty folder"},
		{"plan in order", []string{"plan", "check", file("plan.yaml")}, statusPass, "is in order"},
		{"plan missing", []string{"plan", "check", file("none.yaml")}, statusVoid, "lotgate init"},
		{"replay without limits", []string{"replay", captures + "/good"}, statusMisuse, "needs --limits"},
		{"replay pass", []string{"replay", "--limits", captures + "/limits.yaml", captures + "/good"}, statusPass, "● pass"},
		{"replay fail", []string{"replay", "--limits", captures + "/limits.yaml", captures + "/deaf"}, statusFail, "echo 897 µV, needs at least 2 mV"},
		{"replay marginal", []string{"replay", "--limits", captures + "/limits.yaml", captures + "/marginal-echo"}, statusFail, "neither pass nor fail is proven"},
		{"replay void", []string{"replay", "--limits", captures + "/limits.yaml", captures + "/overload"}, statusVoid, "the if input was overloaded"},
		{"replay of no folder", []string{"replay", "--limits", captures + "/limits.yaml", dir}, statusVoid, "is no capture folder"},
		{"explain without store", []string{"explain", "--store", file("none"), "A"}, statusVoid, "there is no store"},
		{"explain captures", []string{"explain", "--captures", captures + "/good", "sensitivity.echo"}, statusPass, "displacement of the target (calibration)"},
		{"explain an unknown reading", []string{"explain", "--captures", captures + "/good", "song"}, statusVoid, `there is no reading "song": one of supply_current`},
		{"schema", []string{"schema", "driver"}, statusPass, `"$schema"`},
		{"devices", []string{"devices"}, statusPass, "Serial ports"},
	} {
		t.Run(c.name, func(t *testing.T) {
			status, out, errs := lotgate("", c.args...)
			if status != c.status || !strings.Contains(out+errs, c.says) {
				t.Errorf("status %d, want %d; it said\n%s%s\nwant %q", status, c.status, out, errs, c.says)
			}
		})
	}
}

// TestScannedSerials tests several units from one input: odd characters stay in the record and out of
// paths, an empty line is passed over, the same unit twice is a second attempt.
func TestScannedSerials(t *testing.T) {
	dir := starterSet(t)
	status, out, errs := lotgate("A1\n\n../../b c\nA1\nbell\a\n", testArgs(dir, "--json")...)
	if status < statusPass || status > statusVoid {
		t.Fatalf("status %d: %s", status, errs)
	}
	numbers := map[string][]int{}
	for _, line := range strings.Split(strings.TrimSpace(out), "\n") {
		var u station.UnitOutput
		if err := json.Unmarshal([]byte(line), &u); err != nil {
			t.Fatalf("%v in %q", err, line)
		}
		numbers[u.Serial] = append(numbers[u.Serial], u.Number)
	}
	if n := numbers["A1"]; len(n) < 2 || n[len(n)-1] != len(n) || len(numbers["../../b c"]) == 0 {
		t.Errorf("attempts %v", numbers)
	}
	if !strings.Contains(errs, "cannot be printed") || len(numbers) != 2 {
		t.Errorf("a control character was taken: %v\n%s", numbers, errs)
	}
	certificates, _ := filepath.Glob(filepath.Join(dir, "store", "lots", "L", "certificates", "*.pdf"))
	if len(certificates) < 3 {
		t.Errorf("certificates %v", certificates)
	}
	escaped, _ := filepath.Glob(filepath.Join(dir, "..", "b*"))
	if len(escaped) > 0 {
		t.Errorf("a serial number left the store: %v", escaped)
	}
	if status, out, errs := lotgate("", "explain", "--store", filepath.Join(dir, "store"), "../../b c", "supply_current"); status != statusPass || !strings.Contains(out, "shunt and its amplifier") {
		t.Errorf("explain: %d %s%s", status, out, errs)
	}
}

// TestVerify finds a certificate's code in the store, and not a code that was made up.
func TestVerify(t *testing.T) {
	dir := starterSet(t)
	if status, _, errs := lotgate("", testArgs(dir, "--serial", "A1")...); status > statusFail {
		t.Fatal(errs)
	}
	store := filepath.Join(dir, "store")
	_, out, _ := lotgate("", "verify", "--store", store, "A1")
	code := strings.TrimSpace(out[strings.LastIndex(out, "code ")+5:])
	if status, out, _ := lotgate("", "verify", "--store", store, strings.ToLower(code)); status != statusPass || !strings.Contains(out, "unit A1") {
		t.Errorf("%q: %d %s", code, status, out)
	}
	if status, _, errs := lotgate("", "verify", "--store", store, "AAAA-BBBB-CCCC-DDDD"); status != statusFail || !strings.Contains(errs, "holds no attempt") {
		t.Errorf("a made-up code: %d %s", status, errs)
	}
}

// TestUnusableStores: what cannot be written says so, and nothing is tested without a record.
func TestUnusableStores(t *testing.T) {
	dir := starterSet(t)
	if err := os.WriteFile(filepath.Join(dir, "store"), []byte("a file"), 0o644); err != nil {
		t.Fatal(err)
	}
	status, out, errs := lotgate("", testArgs(dir, "--serial", "A1")...)
	if status != statusVoid || out != "" || !strings.Contains(errs, "the store's folder cannot be made") {
		t.Errorf("%d %s%s", status, out, errs)
	}
}

// TestJSONEverywhere: what reports also reports as JSON, nothing else on standard output.
func TestJSONEverywhere(t *testing.T) {
	dir := starterSet(t)
	demo := filepath.Join(t.TempDir(), "demo")
	for _, args := range [][]string{
		{"demo", "--json", "--units", "2", "--out", demo},
		{"explain", "--json", "--store", filepath.Join(demo, "store"), "D00001"},
		{"verify", "--json", "--store", filepath.Join(demo, "store"), "D00001"},
		{"plan", "show", "--json", filepath.Join(dir, "plan.yaml")},
		{"devices", "--json"},
	} {
		status, out, errs := lotgate("", args...)
		lines := strings.Split(strings.TrimSpace(out), "\n")
		if status > statusFail || lines[0] == "" {
			t.Errorf("%v: %d %s", args, status, errs)
		}
		for _, line := range lines {
			if !json.Valid([]byte(line)) {
				t.Errorf("%v printed %q", args, line)
			}
		}
	}
}

// TestReplayJSON holds the shape that other programs read.
func TestReplayJSON(t *testing.T) {
	captures := filepath.Join("..", "..", "testdata", "captures")
	status, out, errs := lotgate("", "replay", "--json", "--limits", captures+"/limits.yaml", captures+"/good", captures+"/dead-oscillator")
	lines := strings.Split(strings.TrimSpace(out), "\n")
	if status != statusFail || len(lines) != 2 {
		t.Fatalf("%d, %d lines: %s", status, len(lines), errs)
	}
	var u struct {
		Lot, Serial, Verdict, Reason string
		Readings                     []struct {
			Name, Unit, Verdict string
			Value               *float64
			Expanded            *float64 `json:"expanded_uncertainty"`
			Coverage            float64
			Lower, Upper        *float64
			Points              []struct {
				Hz       float64 `json:"frequency_hz"`
				Expanded float64 `json:"expanded_uncertainty"`
				Verdict  string
			}
		}
	}
	if err := json.Unmarshal([]byte(lines[0]), &u); err != nil {
		t.Fatal(err)
	}
	if u.Lot != "R-2611" || u.Serial != "good" || u.Verdict != "pass" || u.Reason == "" {
		t.Errorf("%+v", u)
	}
	seen := 0
	for _, r := range u.Readings {
		switch r.Name {
		case "supply_current":
			seen++
			if r.Unit != "A" || *r.Value < 0.030 || *r.Value > 0.0305 || *r.Expanded <= 0 || r.Coverage != 0.95 || *r.Lower != 0.022 || *r.Upper != 0.04 || r.Verdict != "pass" {
				t.Errorf("%+v", r)
			}
		case "noise_floor.corner": // without limits: no verdict, but value and U
			seen++
			if r.Value == nil || r.Expanded == nil || r.Verdict != "" {
				t.Errorf("%+v", r)
			}
		case "response.curve":
			seen++
			if len(r.Points) != 31 || r.Points[0].Hz != 10.25 || r.Points[0].Verdict != "pass" || r.Value != nil {
				t.Errorf("%+v", r)
			}
		}
	}
	if seen != 3 {
		t.Errorf("only %d of the readings were found", seen)
	}
}
