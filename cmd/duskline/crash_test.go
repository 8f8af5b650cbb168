package main

import (
	"bytes"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"duskline/internal/outside"
)

// The full size: go test ./cmd/duskline -run Killed -kill-runs 20 -kills 10 -kill-objects 3000
var (
	killRuns    = flag.Int("kill-runs", 3, "runs that are killed again and again")
	killsARun   = flag.Int("kills", 8, "kills of each")
	killObjects = flag.Int("kill-objects", 900, "objects of each")
)

// crashSettings make blocks small, so that much is begun and ended.
const crashSettings = "[run]\nblock_size = 64\nworkers = 2\n"

// crashSite is a folder with a night, settings and an undisturbed run WHOLE.
type crashSite struct {
	*testing.T
	bin, base string
	env       []string
}

func newCrashSite(t *testing.T, objects int, env ...string) *crashSite {
	t.Helper()
	if testing.Short() {
		t.Skip("looks at files that a program leaves, not at the program; that takes long under the race detector")
	}
	s := &crashSite{T: t, bin: commandFolder(t), base: t.TempDir(), env: append(os.Environ(), env...)}
	if err := writeShort(filepath.Join(s.base, "night"), 3, objects/3); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(s.base, "s.toml"), []byte(crashSettings), 0o666); err != nil {
		t.Fatal(err)
	}
	if code, out := s.run(s.runArgs("WHOLE")...); code != exitDone {
		t.Fatalf("the undisturbed run ends with %d: %s", code, out)
	}
	return s
}

func (s *crashSite) runArgs(out string) []string {
	return []string{"run", "--out", out, "--settings", "s.toml", "-q", "night"}
}

func (s *crashSite) command(args ...string) *exec.Cmd {
	c := exec.Command(filepath.Join(s.bin, quickName), args...)
	c.Dir, c.Env = s.base, s.env
	return c
}

func (s *crashSite) run(args ...string) (code int, output string) {
	s.Helper()
	return finished(s.T, s.command(args...))
}

func finished(t *testing.T, c *exec.Cmd) (code int, output string) {
	t.Helper()
	out, err := c.CombinedOutput()
	var exit *exec.ExitError
	if err != nil && !errors.As(err, &exit) {
		t.Fatal(err)
	}
	return c.ProcessState.ExitCode(), string(out)
}

// sameAsWhole compares everything that a run leaves but log and metrics, and wants
// nothing unfinished.
func (s *crashSite) sameAsWhole(out, what string) {
	s.Helper()
	want := treeOf(s.T, filepath.Join(s.base, "WHOLE"))
	got := treeOf(s.T, filepath.Join(s.base, out))
	for name, text := range want {
		if !bytes.Equal(got[name], text) {
			s.Errorf("%s: %s differs", what, name)
		}
	}
	for name := range got {
		if _, ok := want[name]; !ok {
			s.Errorf("%s: %s was left behind", what, name)
		}
	}
}

func treeOf(t *testing.T, root string) map[string][]byte {
	t.Helper()
	files := map[string][]byte{}
	if err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() || strings.HasSuffix(path, ".log") || strings.HasPrefix(d.Name(), "metrics.") {
			return err
		}
		text, err := os.ReadFile(path)
		files[strings.TrimPrefix(path, root)] = text
		return err
	}); err != nil {
		t.Fatal(err)
	}
	if len(files) < 6 {
		t.Fatalf("%s has %d files: the test is blind", root, len(files))
	}
	return files
}

// TestKilledAnywhere kills runs without warning at random moments, sometimes
// one or both of two commands that work on the same run.
func TestKilledAnywhere(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	s := newCrashSite(t, *killObjects, "QUICK_PAUSE=500us")
	began := time.Now()
	if code, out := s.run(s.runArgs("TIMED")...); code != exitDone {
		t.Fatal(out)
	}
	whole := time.Since(began)
	kills, early := 0, 0
	for k := range *killRuns {
		out := fmt.Sprintf("RUN%d", k)
		for n := 0; n < *killsARun; {
			both := []*exec.Cmd{s.command(s.runArgs(out)...)}
			if r.IntN(4) == 0 {
				both = append(both, s.command(s.runArgs(out)...))
			}
			for _, c := range both {
				if err := c.Start(); err != nil {
					t.Fatal(err)
				}
			}
			time.Sleep(time.Duration(r.Int64N(int64(whole) / 3)))
			first := both[r.IntN(len(both))]
			first.Process.Kill()
			if len(both) == 2 && r.IntN(2) == 0 {
				for _, c := range both {
					c.Process.Kill()
				}
			}
			for _, c := range both {
				c.Wait()
			}
			if first.ProcessState.ExitCode() == -1 { // by a signal
				n++
				kills++
				continue
			}
			// It was faster than the kill. Go on with a run that lacks something.
			early++
			for _, path := range []string{"catalog.csv", "summary.json", fmt.Sprintf("blocks/%06d", r.IntN(*killObjects/64))} {
				if err := os.RemoveAll(filepath.Join(s.base, out, path)); err != nil {
					t.Fatal(err)
				}
			}
		}
		if code, text := s.run(s.runArgs(out)...); code != exitDone {
			t.Fatalf("after its kills run %d ends with %d: %s", k, code, text)
		}
		s.sameAsWhole(out, fmt.Sprintf("run %d, seed %d", k, seed))
	}
	t.Logf("%d kills of %d runs of %d objects; %d commands had ended before", kills, *killRuns, *killObjects, early)
}

// mountSmall mounts a small file system in memory, and returns what changes its
// size.
func mountSmall(t *testing.T, folder string, size int) (resize func(size int)) {
	t.Helper()
	if err := os.MkdirAll(folder, 0o777); err != nil {
		t.Fatal(err)
	}
	mount := func(flags uintptr, size int) error {
		return syscall.Mount("tmpfs", folder, "tmpfs", flags, fmt.Sprintf("size=%d", size))
	}
	if err := mount(0, size); err != nil {
		outside.Missing(t, "a file system in memory cannot be mounted: %v; run the test as root", err)
	}
	t.Cleanup(func() { syscall.Unmount(folder, syscall.MNT_DETACH) })
	return func(size int) {
		if err := mount(syscall.MS_REMOUNT, size); err != nil {
			t.Fatal(err)
		}
	}
}

// TestDiskThatIsFull fills the disk at every stage: the plan, the first blocks,
// the last, the catalogs.
func TestDiskThatIsFull(t *testing.T) {
	s := newCrashSite(t, 900)
	disk := filepath.Join(s.base, "disk")
	resize := mountSmall(t, disk, 4096)
	full := 0
	for size := 4096; ; size += size/2&^4095 + 4096 {
		resize(size)
		code, out := s.run(s.runArgs("disk/RUN")...)
		if code == exitDone {
			break
		}
		full++
		if code != exitFailed || !strings.Contains(out, "no space left on device") || !strings.Contains(out, "make room") {
			t.Errorf("%d bytes: exit code %d, %q", size, code, out)
		}
		if size > 64<<20 {
			t.Fatal("64 MB are not enough?")
		}
	}
	if full < 5 {
		t.Errorf("the disk was full %d times only: the test is blind", full)
	}
	s.sameAsWhole("disk/RUN", "full disk")
}

// TestFolderThatGoesReadOnly takes away the right to write in the middle of a
// run.
func TestFolderThatGoesReadOnly(t *testing.T) {
	s := newCrashSite(t, 900, "QUICK_PAUSE=1ms")
	c := s.command(s.runArgs("RUN")...)
	if os.Geteuid() == 0 { // who may write anywhere
		s.asNobody(c)
	}
	var out bytes.Buffer
	c.Stderr = &out
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	blocks := filepath.Join(s.base, "RUN", "blocks")
	for range 6000 {
		if entries, err := os.ReadDir(blocks); err == nil && len(entries) > 1 {
			break
		}
		time.Sleep(time.Millisecond)
	}
	if err := os.Chmod(blocks, 0o555); err != nil {
		t.Fatal(err)
	}
	c.Wait()
	if code := c.ProcessState.ExitCode(); code != exitFailed || !strings.Contains(out.String(), "permission denied") ||
		!strings.Contains(out.String(), "mend the folder, then repeat the command to go on") {
		t.Errorf("exit code %d, %q", code, &out)
	}
	if err := os.Chmod(blocks, 0o777); err != nil {
		t.Fatal(err)
	}
	if code, text := s.run(s.runArgs("RUN")...); code != exitDone {
		t.Fatalf("exit code %d: %s", code, text)
	}
	s.sameAsWhole("RUN", "read-only folder")
}

// asNobody makes a command run without rights, from a copy of the program that
// anybody may read.
func (s *crashSite) asNobody(c *exec.Cmd) {
	s.Helper()
	self, err := os.Executable()
	if err != nil {
		s.Fatal(err)
	}
	program, err := os.ReadFile(self)
	if err != nil {
		s.Fatal(err)
	}
	open := filepath.Join(s.base, "bin")
	if err := os.Mkdir(open, 0o755); err != nil {
		s.Fatal(err)
	}
	c.Path = filepath.Join(open, quickName)
	if err := os.WriteFile(c.Path, program, 0o755); err != nil {
		s.Fatal(err)
	}
	for folder := s.base; len(folder) > len(os.TempDir()); folder = filepath.Dir(folder) {
		if err := os.Chmod(folder, 0o777); err != nil {
			s.Fatal(err)
		}
	}
	c.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
}

// TestClockThatJumps: no time is compared with another, neither of this machine
// nor of the file system.
func TestClockThatJumps(t *testing.T) {
	s := newCrashSite(t, 900)
	for i, year := range []int{1999, 2101} {
		out := fmt.Sprintf("RUN%d", i)
		if code, text := s.run("run", "--out", out, "--settings", "s.toml", "--shard", "0/2", "-q", "night"); code != exitDone {
			t.Fatal(text)
		}
		left := filepath.Join(s.base, out, "blocks", ".unfinished-000001-KILLED")
		if err := os.Mkdir(left, 0o777); err != nil {
			t.Fatal(err)
		}
		then := time.Date(year, 3, 14, 0, 0, 0, 0, time.UTC)
		if err := filepath.WalkDir(filepath.Join(s.base, out), func(path string, _ fs.DirEntry, err error) error {
			return errors.Join(err, os.Chtimes(path, then, then))
		}); err != nil {
			t.Fatal(err)
		}
		code, text := s.run("run", "--out", out)
		if code != exitDone || !strings.Contains(text, "already_done=452") { // blocks 0, 2, ... 14 of 0 to 14, the last of 4 spectra
			t.Errorf("%d: exit code %d: %s", year, code, text)
		}
		s.sameAsWhole(out, fmt.Sprint(year))
	}
	// The clock is set while commands run, one of which is killed.
	s.env = append(s.env, "QUICK_CLOCK=jumps", "QUICK_PAUSE=1ms")
	c := s.command(s.runArgs("JUMPS")...)
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	blocks := filepath.Join(s.base, "JUMPS", "blocks", "000002")
	for range 6000 {
		if _, err := os.Stat(blocks); err == nil {
			break
		}
		time.Sleep(time.Millisecond)
	}
	c.Process.Kill()
	c.Wait()
	began := time.Now()
	if code, text := s.run(s.runArgs("JUMPS")...); code != exitDone {
		t.Fatal(text)
	}
	took := time.Since(began).Seconds()
	s.sameAsWhole("JUMPS", "a clock that is set")
	m := readMetrics(t, filepath.Join(s.base, "JUMPS", "metrics.json"))
	if most := float64(m.DoneHere) * 2000; m.State != "done" || m.Done != 900 || m.DoneHere == 0 || m.DoneHere == 900 || // by two workers, 1 ms a spectrum
		!(m.PerSecond > float64(m.DoneHere)/took-1) || m.PerSecond > most || m.Seconds > took || m.Seconds <= 0 {
		t.Errorf("it took %.1f s, and the metrics are %+v", took, m)
	}
	if gap := m.Updated.Sub(m.Started).Abs(); gap < 24*time.Hour {
		t.Errorf("the clock did not jump: %v", gap)
	}
}
