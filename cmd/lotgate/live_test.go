//go:build linux && cgo

package main

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"lotgate/limits"
	"lotgate/station"
	"lotgate/station/record"
)

// TestMain lets the test binary be the program itself, so that the virtual bench and the
// station are processes of their own.
func TestMain(m *testing.M) {
	if os.Getenv("LOTGATE_BE_THE_PROGRAM") != "" {
		main()
		return
	}
	os.Exit(m.Run())
}

// liveBench is a sound server and a virtual bench, each a process of its own.
type liveBench struct {
	dir            string
	env            []string
	server, bench  *exec.Cmd
	station, store string
}

// startLive starts both; the test is skipped where there is no sound server program.
func startLive(t *testing.T) *liveBench {
	t.Helper()
	if testing.Short() {
		t.Skip("runs in real time: left out with -short")
	}
	if _, err := exec.LookPath("pulseaudio"); err != nil {
		t.Skip("no sound server to test with: install the packages pulseaudio and pulseaudio-utils")
	}
	dir := t.TempDir()
	if err := os.Chmod(dir, 0o700); err != nil {
		t.Fatal(err)
	}
	socket := filepath.Join(dir, "pulse.sock")
	l := &liveBench{dir: dir, store: filepath.Join(dir, "store"), station: filepath.Join(dir, "station.yaml"),
		env: append(os.Environ(), "XDG_RUNTIME_DIR="+dir, "PULSE_RUNTIME_PATH="+filepath.Join(dir, "pulse"), "HOME="+dir, "PULSE_SERVER=unix:"+socket, "LOTGATE_BE_THE_PROGRAM=1")}
	sink := func(name string) string {
		return "module-null-sink sink_name=" + name + " format=float32le rate=48000 channels=2 norewinds=1"
	}
	l.server = exec.Command("pulseaudio", "-n", "--daemonize=no", "--exit-idle-time=-1", "--disallow-exit=0", "--use-pid-file=no", "--realtime=no", "--high-priority=no", "--disable-shm=yes",
		"-L", "module-native-protocol-unix auth-anonymous=1 socket="+socket, "-L", sink("drive"), "-L", sink("bench"))
	l.start(t, l.server)
	l.waitFor(t, "the sound server", func() bool {
		probe := exec.Command("pactl", "info")
		probe.Env = l.env
		return probe.Run() == nil
	})
	l.bench = exec.Command(os.Args[0], "virtual", "--record", "drive.monitor", "--play", "bench", "--serial", "L00001",
		"--write-station", l.station, "--station-play", "drive", "--station-record", "bench.monitor", "--store", l.store)
	stdin, err := l.bench.StdinPipe() // stays open: the bench's operator says nothing
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { stdin.Close() })
	l.start(t, l.bench)
	l.waitFor(t, "the virtual bench", func() bool { _, err := os.Stat(l.station); return err == nil })
	var out bytes.Buffer
	if status := run(context.Background(), []string{"init", filepath.Join(dir, "files")}, strings.NewReader(""), &out, io.Discard); status != statusPass {
		t.Fatalf("init gave %d", status)
	}
	return l
}

func (l *liveBench) start(t *testing.T, c *exec.Cmd) {
	t.Helper()
	c.Env, c.Dir = l.env, l.dir
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = c.Process.Kill()
		_ = c.Wait()
	})
}

func (l *liveBench) waitFor(t *testing.T, what string, there func() bool) {
	t.Helper()
	for range 200 {
		if there() {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	t.Fatalf("%s did not start", what)
}

// test runs the program's test command on one unit; during, if not nil, is called once
// after some time with the running process.
func (l *liveBench) test(t *testing.T, after time.Duration, during func(p *os.Process)) (station.UnitOutput, int, string) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 90*time.Second)
	defer cancel()
	c := exec.CommandContext(ctx, os.Args[0], "test", "--station", l.station, "--plan", filepath.Join(l.dir, "files", "plan.yaml"),
		"--lot", "live", "--operator", "test", "--serial", "L00001", "--json")
	c.Env, c.Dir = l.env, l.dir
	var out, errs bytes.Buffer
	c.Stdout, c.Stderr = &out, &errs
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	if during != nil {
		timer := time.AfterFunc(after, func() { during(c.Process) })
		defer timer.Stop()
	}
	_ = c.Wait()
	if ctx.Err() != nil {
		t.Fatalf("the test command hangs; it said:\n%s", errs.String())
	}
	var u station.UnitOutput
	if err := json.NewDecoder(&out).Decode(&u); err != nil {
		t.Fatalf("no result (%v); it said:\n%s", err, errs.String())
	}
	return u, c.ProcessState.ExitCode(), errs.String()
}

// kept reads the unit's attempts from the store: nothing may be lost.
func (l *liveBench) kept(t *testing.T) []*record.Attempt {
	t.Helper()
	s, err := record.Open(context.Background(), l.store)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	var all []*record.Attempt
	if err := s.Attempts(context.Background(), record.Filter{Lot: "live"}, func(a *record.Attempt) bool { all = append(all, a); return true }); err != nil {
		t.Fatal(err)
	}
	return all
}

func TestLiveUnitThroughSerialLineAndSound(t *testing.T) {
	l := startLive(t)
	u, status, said := l.test(t, 0, nil)
	if u.Verdict != limits.Pass || status != statusPass {
		t.Errorf("unit is %s (status %d): %s\n%s", u.Verdict, status, u.Reason, said)
	}
	if n := len(l.kept(t)); n != 1 {
		t.Errorf("%d attempts are kept instead of 1", n)
	}
}

// TestLiveBreakdowns kills in turn what a test depends on, and stops the test itself: each time
// the attempt is void with a reason, kept, and nothing hangs.
func TestLiveBreakdowns(t *testing.T) {
	for _, c := range []struct {
		name   string
		after  time.Duration
		kill   func(l *liveBench, station *os.Process)
		reason string
	}{
		{"virtual bench killed", 4 * time.Second, func(l *liveBench, _ *os.Process) { _ = l.bench.Process.Kill() }, "unplugged"},
		{"sound server killed", 6 * time.Second, func(l *liveBench, _ *os.Process) { _ = l.server.Process.Kill() }, "the device has stopped"},
		{"station stopped by hand", 4 * time.Second, func(_ *liveBench, p *os.Process) { _ = p.Signal(os.Interrupt) }, "stopped by the operator"},
		{"station ended", 4 * time.Second, func(_ *liveBench, p *os.Process) { _ = p.Signal(syscall.SIGTERM) }, "stopped by the operator"},
	} {
		t.Run(c.name, func(t *testing.T) {
			l := startLive(t)
			u, status, said := l.test(t, c.after, func(p *os.Process) { c.kill(l, p) })
			if u.Verdict != limits.Void || status != statusVoid {
				t.Errorf("unit is %s (status %d): %s", u.Verdict, status, u.Reason)
			}
			if !strings.Contains(u.Reason, c.reason) {
				t.Errorf("the reason %q does not say %q\n%s", u.Reason, c.reason, said)
			}
			kept := l.kept(t)
			if len(kept) != 1 || kept[0].Verdict != limits.Void {
				t.Fatalf("%d attempts are kept instead of one void one", len(kept))
			}
			tried := false
			for _, e := range kept[0].Events {
				tried = tried || e.Kind == "safe" || strings.Contains(e.Text, "safe state")
			}
			if !tried {
				t.Error("the safe state was not tried")
			}
		})
	}
}
