// Package cluster turns the size of a run and the measured speed of a sample
// into a job array for Slurm: how many elements, how long, how much memory, and
// the scripts. It is arithmetic and text; nothing is read or started here.
package cluster

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"duskline/internal/shards"
)

// Sample is what a short run on this machine has shown.
type Sample struct {
	Objects int
	Seconds float64 // of one worker for all of them
	Before  int64   // largest resident memory before it, bytes
	After   int64   // and after it
}

// Need is what an array asks for.
type Need struct {
	Elements int // shards
	Minutes  int // of the longest element, with reserve
	MemoryMB int // of each
}

// The reserve on what was measured: another machine may be slower and more
// crowded, and an element that runs out of time does part of its work twice
// (common practice, no source).
const (
	timeReserve   = 3
	minutesLeast  = 10
	memoryReserve = 1.5
	memoryRest    = 256 << 20 // bytes beside what the sample shows: blocks in flight, page tables
)

// MostElements is the largest array that Slurm takes unless its MaxArraySize was
// raised (slurm.conf manual: 1001, the largest index plus one).
const MostElements = 1000

// Size chooses an array for a run of blocks with blockSize objects each, of
// which those with the numbers missing are to be done, with workers objects at a time in each
// element. elements fixes their number; 0 chooses it so that each takes about
// the wanted minutes.
func Size(s Sample, blocks int, missing []int, blockSize, workers, elements int, minutes float64) Need {
	each := s.Seconds / float64(max(s.Objects, 1)) // of one worker
	block := each * float64(blockSize) / float64(workers)
	if elements == 0 {
		elements = int(math.Ceil(float64(len(missing)) * block / (60 * minutes)))
		elements = min(max(elements, 1), MostElements)
	}
	n := Need{Elements: min(elements, blocks)}
	longest := 0
	of := make([]int, n.Elements)
	for _, b := range missing {
		i := shards.Of(b, n.Elements)
		of[i]++
		longest = max(longest, of[i])
	}
	n.Minutes = max(int(math.Ceil(timeReserve*float64(longest)*block/60)), minutesLeast)
	grown := max(s.After-s.Before, 0)
	bytes := memoryReserve*(float64(s.Before)+float64(workers)*float64(grown)) + memoryRest
	n.MemoryMB = int(math.Ceil(bytes / (1 << 20)))
	return n
}

// Array describes the scripts of one submission.
type Array struct {
	Need
	Name      string   // of the job
	Program   string   // path of the binary
	Run       string   // path of the run folder
	Like      string   // path of an earlier run whose rows are taken over, or empty
	Folder    string   // path of the folder for scripts and logs
	Shards    []int    // elements to be run, in order
	Workers   int      // objects at a time, and processors of each element
	Partition string   // empty for the cluster's own choice
	Account   string   // the same
	Options   []string // more options of sbatch, such as "--qos=night"
}

// ErrLine is wrapped by errors about a text that cannot stand in a script.
var ErrLine = errors.New("line break in a name or an option")

// ElementScript returns the script of the array: element I does shard I of Elements.
// A script that is run again, or twice at the same time, changes nothing.
func (a *Array) ElementScript() (string, error) {
	lines := append(a.head("array", "array-%A_%a.log", a.Minutes, a.MemoryMB, a.Workers),
		"#SBATCH --array="+shards.Ranges(a.Shards, ","), "#SBATCH --requeue")
	command := fmt.Sprintf(`exec %s run --out %s --shard "$SLURM_ARRAY_TASK_ID/%d" --workers %d --quiet --log-format json`,
		Quote(a.Program), Quote(a.Run), a.Elements, a.Workers)
	if a.Like != "" {
		command += " --like " + Quote(a.Like)
	}
	return a.script(lines, command)
}

// The gathering reads and writes at the speed of the disk; it has room for
// about a hundred million objects.
const (
	gatherMinutes  = 240
	gatherMemoryMB = 1024
)

// GatherScript returns the script that joins the blocks.
func (a *Array) GatherScript() (string, error) {
	return a.script(a.head("gather", "gather-%j.log", gatherMinutes, gatherMemoryMB, 2),
		fmt.Sprintf("exec %s gather --log-format json %s", Quote(a.Program), Quote(a.Run)))
}

func (a *Array) head(part, log string, minutes, memoryMB, cpus int) []string {
	lines := []string{
		fmt.Sprintf("#SBATCH --job-name=%s-%s", a.Name, part),
		"#SBATCH --ntasks=1",
		fmt.Sprintf("#SBATCH --cpus-per-task=%d", cpus),
		fmt.Sprintf("#SBATCH --time=%d", minutes),
		fmt.Sprintf("#SBATCH --mem=%dM", memoryMB),
		"#SBATCH --open-mode=append",
		fmt.Sprintf("#SBATCH --output=%q", strings.ReplaceAll(a.Folder, "%", "%%")+"/"+log),
	}
	if a.Partition != "" {
		lines = append(lines, "#SBATCH --partition="+a.Partition)
	}
	if a.Account != "" {
		lines = append(lines, "#SBATCH --account="+a.Account)
	}
	for _, o := range a.Options {
		lines = append(lines, "#SBATCH "+o)
	}
	return lines
}

func (a *Array) script(head []string, command string) (string, error) {
	all := append([]string{"#!/bin/bash"}, head...)
	all = append(all, command)
	for _, line := range all {
		if strings.ContainsAny(line, "\r\n\x00") {
			return "", fmt.Errorf("%w: %q", ErrLine, line)
		}
	}
	return strings.Join(all, "\n") + "\n", nil
}

// Quote writes a text as one word of a POSIX shell.
func Quote(s string) string {
	return "'" + strings.ReplaceAll(s, "'", `'\''`) + "'"
}
