package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"duskline/internal/outside"
)

// slurmSite is a Slurm of two nodes on this machine with a run to be done.
type slurmSite struct {
	*crashSite
}

// startSlurm starts the daemons and stops exactly these at the end. They need
// slurmctld, slurmd, slurm-client and munge, and root.
func startSlurm(t *testing.T, s *crashSite) *slurmSite {
	t.Helper()
	for _, name := range []string{"slurmctld", "slurmd", "sbatch", "munged"} {
		outside.Program(t, name)
	}
	folder, err := os.MkdirTemp("/tmp", "lrslurm") // short: a socket lives there
	if err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("bash", "testdata/slurm/start.sh", folder).Output()
	t.Cleanup(func() {
		if err := exec.Command("bash", "testdata/slurm/stop.sh", folder).Run(); err != nil {
			t.Errorf("the test Slurm was not stopped: %v", err)
		}
		os.RemoveAll(folder)
	})
	if err != nil {
		t.Fatalf("the test Slurm does not start: %v\n%s", err, out)
	}
	conf, ok := strings.CutPrefix(strings.TrimSpace(string(out)), "export SLURM_CONF=")
	if !ok {
		t.Fatalf("start.sh says %q", out)
	}
	s.env = append(s.env, "SLURM_CONF="+conf)
	return &slurmSite{s}
}

// client runs a client of Slurm.
func (s *slurmSite) client(name string, args ...string) string {
	s.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	c := exec.CommandContext(ctx, name, args...)
	c.Dir, c.Env = s.base, s.env
	out, err := c.CombinedOutput()
	if err != nil {
		s.Fatalf("%s %q: %v\n%s", name, args, err, out)
	}
	return string(out)
}

// eventually waits for something that only a broken Slurm does not bring.
func (s *slurmSite) eventually(what string, there func() bool) {
	s.Helper()
	for range 1200 {
		if there() {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	logs, _ := filepath.Glob(filepath.Join(s.base, "RUN/slurm/*.log"))
	for _, path := range logs {
		text, _ := os.ReadFile(path)
		s.Logf("%s:\n%s", path, text)
	}
	s.Fatalf("%s did not come; squeue:\n%s", what, s.client("squeue", "-t", "all"))
}

// ended waits until nothing is pending or running.
func (s *slurmSite) ended() {
	s.Helper()
	s.eventually("the end of all jobs", func() bool {
		return strings.TrimSpace(s.client("squeue", "-h", "-r", "-t", "PD,R,CG,CF,S,RQ")) == ""
	})
}

// elementPid finds the process that does a shard, 0 for none.
func elementPid(shard string) int {
	lines, _ := filepath.Glob("/proc/[0-9]*/cmdline")
	for _, path := range lines {
		text, err := os.ReadFile(path)
		if err == nil && bytes.Contains(text, []byte("\x00--shard\x00"+shard+"\x00")) && !bytes.HasPrefix(text, []byte("/bin/bash")) {
			pid, _ := strconv.Atoi(filepath.Base(filepath.Dir(path)))
			return pid
		}
	}
	return 0
}

func (s *slurmSite) status() (st runStatus, code int) {
	s.Helper()
	c := s.command("cluster", "status", "--json", "RUN")
	out, err := c.Output()
	if err != nil && len(out) == 0 {
		s.Fatal(err)
	}
	if err := json.Unmarshal(out, &st); err != nil {
		s.Fatalf("%v: %s", err, out)
	}
	return st, c.ProcessState.ExitCode()
}

// jobs reads the numbers of the last array and its gathering.
func (s *slurmSite) jobs() (array, gather string) {
	s.Helper()
	r := readRecord(filepath.Join(s.base, "RUN"))
	if len(r.Jobs) < 2 {
		s.Fatalf("the record of the array is %+v", r)
	}
	return r.Jobs[len(r.Jobs)-2], r.Jobs[len(r.Jobs)-1]
}

// TestSlurm kills one element, runs one twice, cancels one, submits what is
// missing and requeues one of these, on two nodes with different numbers of
// workers: the catalogs are those of one run on one machine.
func TestSlurm(t *testing.T) {
	if os.Getenv("DUSKLINE_SLURM") != "1" {
		t.Skip("needs Slurm daemons of its own; set DUSKLINE_SLURM=1 as the gate does")
	}
	site := newCrashSite(t, 1500, "QUICK_PAUSE=8ms")
	s := startSlurm(t, site)
	code, out := s.run("cluster", "slurm", "--out", "RUN", "--settings", "s.toml", "--elements", "4", "--sample", "5", "--submit", "night")
	if code != exitDone || !strings.Contains(out, "24 of 24 blocks are to be done: 4 of 4 elements with 1 processors") {
		t.Fatalf("exit code %d: %s", code, out)
	}
	array, _ := s.jobs()

	// One more of element 2, on the other node, with other workers.
	script, err := os.ReadFile(filepath.Join(s.base, "RUN/slurm/array.sh"))
	if err != nil {
		t.Fatal(err)
	}
	double := filepath.Join(s.base, "double.sh")
	text := strings.Replace(string(script), "--workers 1", "--workers 3", 1)
	if err := os.WriteFile(double, []byte(text), 0o777); err != nil || text == string(script) {
		t.Fatal("the script has no --workers", err)
	}
	s.client("sbatch", "--array=2", "-w", "node2", double)

	pid := 0
	s.eventually("element 1", func() bool { pid = elementPid("1/4"); return pid != 0 })
	if err := syscall.Kill(pid, syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	s.eventually("element 3", func() bool { return elementPid("3/4") != 0 })
	s.client("scancel", array+"_3")
	s.ended()

	st, code := s.status()
	if code != exitFailed || st.Elements != 4 || fmt.Sprint(st.Wanted) != "[1 3]" || st.Gathered || len(st.Jobs) == 0 {
		t.Fatalf("after the first array: exit code %d, %+v", code, st)
	}
	if code, out := s.run("cluster", "status", "RUN"); code != exitFailed ||
		!strings.Contains(out, "Elements of the array with missing blocks: 1,3 of 4.") {
		t.Errorf("status: exit code %d, %s", code, out)
	}

	// What is missing, one of it requeued.
	code, out = s.run("cluster", "slurm", "--out", "RUN", "--sample", "5", "--submit")
	if code != exitDone || !strings.Contains(out, "2 of 4 elements") {
		t.Fatalf("exit code %d: %s", code, out)
	}
	array, gather := s.jobs()
	s.eventually("element 1 again", func() bool { return elementPid("1/4") != 0 })
	s.client("scontrol", "requeue", array+"_1")
	s.ended()
	if st, code = s.status(); code != exitDone || !st.Gathered || len(st.Missing) != 0 {
		text, _ := os.ReadFile(filepath.Join(s.base, "RUN/slurm/gather-"+gather+".log"))
		t.Fatalf("after the second array: exit code %d, %+v\n%s", code, st, text)
	}
	s.restsLikeWhole()
}

// restsLikeWhole compares catalogs and blocks; scripts and logs are beside them.
func (s *slurmSite) restsLikeWhole() {
	s.Helper()
	if err := os.RemoveAll(filepath.Join(s.base, "RUN", slurmFolder)); err != nil {
		s.Fatal(err)
	}
	s.sameAsWhole("RUN", "two nodes")
}
