package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"time"

	"duskline/cluster"
	"duskline/internal/shards"
	"duskline/pipeline"
)

type clusterCmd struct {
	Slurm  slurmCmd  `cmd:"" help:"Write, and submit, a job array for Slurm that does a run and gathers it."`
	Status statusCmd `cmd:"" help:"Say what of a run is done, and how to go on."`
}

type slurmCmd struct {
	jobFlags
	Submit    bool     `help:"Submit the scripts with sbatch."`
	Elements  int      `placeholder:"N" help:"Elements of the array; by default so many that each takes about --minutes."`
	Minutes   float64  `default:"60" placeholder:"M" help:"Time that an element should take."`
	Sample    int      `default:"50" placeholder:"N" help:"Spectra measured here to foretell time and memory."`
	Partition string   `placeholder:"NAME" help:"Partition to ask for."`
	Account   string   `placeholder:"NAME" help:"Account to ask for."`
	Sbatch    []string `placeholder:"OPTION" sep:"none" help:"Another option for sbatch, such as --sbatch=--qos=night; may be repeated."`
	logFlags
}

// Help teaches by example.
func (slurmCmd) Help() string {
	return `Plans the run if it is not planned, measures a few of its spectra on this machine, and writes RUN/slurm/array.sh and gather.sh: an array of which each element does one shard, and a job that joins the blocks when all elements have ended. --workers says how many processors each element gets, 1 unless given. An element that is requeued, or runs twice, changes nothing. The run folder, the inputs and this program must have the same paths on all nodes.

When a run was begun already, only elements with missing blocks are in the array: the same command, without any PATH, submits what killed or cancelled elements left.

Examples:
  duskline cluster slurm --out RUN --workers 8 --submit night/   plan, size and submit
  duskline cluster status RUN                                    what is done, what to do
  duskline cluster slurm --out RUN --workers 8 --submit          submit what is missing

Other engines for job arrays: make each element run duskline run --out RUN --shard I/N, or set DUSKLINE_SHARD to I/N for it; then duskline gather RUN.`
}

// arrayRecord is RUN/slurm/array.json: what was written and submitted last.
type arrayRecord struct {
	Elements int      `json:"elements"`
	Jobs     []string `json:"jobs"` // array and gathering, newest last
}

const slurmFolder = "slurm"

func (c *slurmCmd) run(a *app) (int, error) {
	if c.Elements < 0 || c.Sample < 1 || !(c.Minutes > 0) || c.Workers < 0 {
		return 0, &pipeline.InputError{Problems: []string{"--elements, --minutes, --sample and --workers must be above zero"}}
	}
	if c.Submit {
		if _, err := exec.LookPath("sbatch"); err != nil {
			return 0, &pipeline.InputError{Problems: []string{"--submit: sbatch is not on this machine; submit the scripts from one that has it"}}
		}
	}
	workers := max(c.Workers, 1)
	job, err := c.job(a)
	if err != nil {
		return 0, err
	}
	s := a.begin(&job, c.logFlags)
	defer s.end()
	r, err := s.prepare(job)
	if err != nil {
		return 0, err
	}
	missing, err := r.Missing(a.ctx)
	if err != nil {
		return 0, err
	}
	if len(missing) == 0 {
		fmt.Fprintf(a.stdout, "All %d blocks of %s are done. Next: duskline gather %s\n", r.Blocks(), c.Out, c.Out)
		return exitDone, nil
	}
	sample, err := s.measure(r, c.Sample)
	if err != nil {
		return 0, err
	}
	record := readRecord(r.Folder())
	if c.Elements == 0 && len(missing) < r.Blocks() {
		c.Elements = record.Elements // the same shards as before, 0 if there were none
	}
	array := cluster.Array{
		Need: cluster.Size(sample, r.Blocks(), missing, r.BlockSize(), workers, c.Elements, c.Minutes),
		Name: "duskline-" + r.ID()[:8], Program: a.program, Run: r.Folder(), Folder: filepath.Join(r.Folder(), slurmFolder),
		Workers: workers, Partition: c.Partition, Account: c.Account, Options: c.Sbatch,
	}
	if c.Like != "" {
		array.Like = a.locate(c.Like)
	}
	array.Shards = shards.With(missing, array.Elements)
	record.Elements = array.Elements
	scripts, err := writeScripts(&array)
	if err != nil {
		return 0, err
	}
	fmt.Fprintf(a.stdout, "%d of %d blocks are to be done: %d of %d elements with %d processors, %d MB and %d minutes each (%.1f ms a spectrum here).\n",
		len(missing), r.Blocks(), len(array.Shards), array.Elements, workers, array.MemoryMB, array.Minutes,
		1e3*sample.Seconds/float64(max(sample.Objects, 1)))
	if !c.Submit {
		fmt.Fprintf(a.stdout, "Submit %s, then %s with --dependency=afterany: and the number of the first; or repeat this command with --submit.\n",
			scripts[0], scripts[1])
		return exitDone, writeRecord(r.Folder(), record)
	}
	first, err := sbatch(a.ctx, scripts[0])
	if err != nil {
		return 0, err
	}
	record.Jobs = append(record.Jobs, first)
	second, err := sbatch(a.ctx, "--dependency=afterany:"+first, scripts[1])
	if err == nil {
		record.Jobs = append(record.Jobs, second)
		fmt.Fprintf(a.stdout, "Submitted: array %s, gathering %s. See how it goes with duskline cluster status %s\n", first, second, c.Out)
		s.log.Info("submitted", "array", first, "gathering", second, "elements", shards.Ranges(array.Shards, ","), "of", array.Elements)
	}
	return exitDone, errors.Join(err, writeRecord(r.Folder(), record))
}

// measure runs a sample on this machine.
func (s *session) measure(r *pipeline.Run, n int) (cluster.Sample, error) {
	var out cluster.Sample
	out.Before = residentMost()
	began := s.clock.elapsed()
	var err error
	out.Objects, err = r.Sample(s.ctx, n, func() { began = s.clock.elapsed() })
	if out.Objects == 0 { // a single object
		out.Objects = 1
	}
	out.Seconds = (s.clock.elapsed() - began).Seconds()
	out.After = residentMost()
	return out, err
}

// residentMost returns the largest resident memory so far, bytes: the "high water
// mark" of proc_pid_status(5), since getrusage(2) also counts what the parent had
// when it started this program. 0 where there is no such file.
func residentMost() int64 {
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		return 0
	}
	_, rest, _ := strings.Cut(string(text), "\nVmHWM:")
	var kilobytes int64
	if _, err := fmt.Sscan(rest, &kilobytes); err != nil {
		return 0
	}
	return kilobytes * 1024
}

func writeScripts(array *cluster.Array) ([2]string, error) {
	var paths [2]string
	if err := os.MkdirAll(array.Folder, 0o777); err != nil {
		return paths, fmt.Errorf("the folder for the scripts cannot be made: %w", err)
	}
	for i, script := range []struct {
		name  string
		write func() (string, error)
	}{{"array.sh", array.ElementScript}, {"gather.sh", array.GatherScript}} {
		text, err := script.write()
		if err != nil {
			return paths, &pipeline.InputError{Problems: []string{err.Error()}}
		}
		paths[i] = filepath.Join(array.Folder, script.name)
		if err := os.WriteFile(paths[i], []byte(text), 0o777); err != nil {
			return paths, fmt.Errorf("the script cannot be written: %w", err)
		}
	}
	return paths, nil
}

func recordPath(run string) string { return filepath.Join(run, slurmFolder, "array.json") }

// readRecord returns an empty record where there is none that can be read.
func readRecord(run string) arrayRecord {
	var r arrayRecord
	text, err := os.ReadFile(recordPath(run))
	if err != nil || json.Unmarshal(text, &r) != nil || r.Elements < 0 {
		return arrayRecord{}
	}
	return r
}

func writeRecord(run string, r arrayRecord) error {
	text, err := json.Marshal(r)
	if err != nil {
		return err
	}
	if err := os.WriteFile(recordPath(run), append(text, '\n'), 0o666); err != nil {
		return fmt.Errorf("the record of the array cannot be written: %w", err)
	}
	return nil
}

// clientPatience bounds how long a client of Slurm may take: without its
// controller one tries for minutes.
const clientPatience = time.Minute

// sbatch submits a script and returns the number of the job.
func sbatch(ctx context.Context, args ...string) (string, error) {
	out, err := slurmClient(ctx, "sbatch", append([]string{"--parsable"}, args...)...)
	if err != nil {
		return "", err
	}
	id, _, _ := strings.Cut(strings.TrimSpace(out), ";")
	return id, nil
}

func slurmClient(ctx context.Context, name string, args ...string) (string, error) {
	ctx, cancel := context.WithTimeout(ctx, clientPatience)
	defer cancel()
	c := exec.CommandContext(ctx, name, args...)
	var stderr bytes.Buffer
	c.Stderr = &stderr
	out, err := c.Output()
	if err != nil {
		return "", fmt.Errorf("%s failed: %w: %s", name, err, strings.TrimSpace(stderr.String()))
	}
	return string(out), nil
}

type statusCmd struct {
	JSON bool   `name:"json" help:"Print JSON."`
	Run  string `arg:"" help:"Folder of the run."`
}

// Help teaches by example.
func (statusCmd) Help() string {
	return `Reads the blocks of a run, whichever machines did them, and says what is missing, in which elements of the array, and which command goes on. Every block is checked by its digest. The exit code is 0 when all blocks are done and 1 when some are missing.`
}

// runStatus is what status prints as JSON.
type runStatus struct {
	Run      string   `json:"run"`
	Objects  int64    `json:"objects"`
	Blocks   int      `json:"blocks"`
	Done     int      `json:"blocks_done"`
	Missing  []int    `json:"missing_blocks"`
	Elements int      `json:"elements"`         // of the array written last, 0 for none
	Wanted   []int    `json:"missing_elements"` // those with missing blocks
	Gathered bool     `json:"gathered"`         // whole catalogs are there
	Jobs     []string `json:"jobs,omitempty"`   // "element state reason" of the last array and its gathering, if Slurm knows them
}

func (c *statusCmd) run(a *app) (int, error) {
	r, err := pipeline.Recorded(pipeline.Job{Out: c.Run, Base: a.folder, Program: version(), Build: build()})
	if err != nil {
		return 0, err
	}
	s := runStatus{Run: r.ID(), Objects: r.Objects(), Blocks: r.Blocks(), Missing: []int{}, Wanted: []int{}}
	missing, err := r.Missing(a.ctx)
	if err != nil {
		return 0, err
	}
	s.Missing = append(s.Missing, missing...)
	s.Done = s.Blocks - len(missing)
	record := readRecord(r.Folder())
	if s.Elements = record.Elements; s.Elements > 0 {
		s.Wanted = append(s.Wanted, shards.With(missing, s.Elements)...)
	}
	summary, err := pipeline.ReadSummary(filepath.Join(r.Folder(), "summary.json"))
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return 0, err
	}
	s.Gathered = err == nil && summary.Complete && summary.Run == r.ID()
	s.Jobs = jobStates(a.ctx, record.Jobs)
	code := exitDone
	if len(missing) > 0 {
		code = exitFailed
	}
	if c.JSON {
		enc := json.NewEncoder(a.stdout)
		enc.SetIndent("", "  ")
		return code, enc.Encode(s)
	}
	c.print(a, &s)
	return code, nil
}

func (c *statusCmd) print(a *app, s *runStatus) {
	fmt.Fprintf(a.stdout, "%s: %d of %d blocks done, %d spectra planned.\n", c.Run, s.Done, s.Blocks, s.Objects)
	for _, j := range s.Jobs {
		fmt.Fprintf(a.stdout, "  %s\n", j)
	}
	switch {
	case len(s.Missing) > 0 && s.Elements > 0:
		fmt.Fprintf(a.stdout, "Elements of the array with missing blocks: %s of %d.\n", shards.Ranges(s.Wanted, ","), s.Elements)
		fmt.Fprintf(a.stdout, "When none of them runs any more: duskline cluster slurm --out %s --submit, or duskline run --out %s here.\n", c.Run, c.Run)
	case len(s.Missing) > 0:
		fmt.Fprintf(a.stdout, "Go on with duskline run --out %s.\n", c.Run)
	case !s.Gathered:
		fmt.Fprintf(a.stdout, "Next: duskline gather %s\n", c.Run)
	default:
		fmt.Fprintf(a.stdout, "The catalogs are whole.\n")
	}
}

// jobStates asks Slurm about the last array and its gathering; what it does not
// know is left out.
func jobStates(ctx context.Context, jobs []string) []string {
	if _, err := exec.LookPath("squeue"); err != nil || len(jobs) == 0 {
		return nil
	}
	last := jobs[max(0, len(jobs)-2):]
	out, err := slurmClient(ctx, "squeue", "-h", "-r", "-t", "all", "-j", strings.Join(last, ","), "-o", "%i %T %r")
	if err != nil {
		return nil
	}
	return strings.Split(strings.TrimSpace(out), "\n")
}
