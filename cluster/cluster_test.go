package cluster

import (
	"errors"
	"os/exec"
	"slices"
	"strings"
	"testing"
)

func TestSize(t *testing.T) {
	s := Sample{Objects: 100, Seconds: 2, Before: 100 << 20, After: 140 << 20} // 20 ms an object, 40 MB a worker
	numbers := make([]int, 5_000_000)
	for i := range numbers {
		numbers[i] = i
	}
	for _, k := range []struct {
		blocks, missing, blockSize, workers, elements int
		minutes                                       float64
		want                                          Need
	}{
		// 2,000 blocks of 512: 10.24 s a block, 5.12 with two workers: 170.7 min of 2,000.
		{2000, 2000, 512, 2, 0, 60, Need{3, 171, 526}},     // 667 blocks, 56.9 min, three times; 1.5 (100 + 80) + 256 MB
		{2000, 2000, 512, 2, 0, 10, Need{18, 29, 526}},     // 17.07 elements; 112 blocks, 9.6 min
		{2000, 100, 512, 2, 0, 60, Need{1, 26, 526}},       // the 100 that are missing, 8.5 min
		{2000, 2000, 512, 1, 40, 60, Need{40, 26, 466}},    // 50 blocks, 8.5 min
		{3, 3, 512, 1, 40, 60, Need{3, minutesLeast, 466}}, // not more elements than blocks
		{5_000_000, 5_000_000, 512, 1, 0, 10, Need{MostElements, 2560, 466}},
	} {
		if got := Size(s, k.blocks, numbers[:k.missing], k.blockSize, k.workers, k.elements, k.minutes); got != k.want {
			t.Errorf("%+v: %+v", k, got)
		}
	}
}

func TestScriptsAreShell(t *testing.T) {
	a := Array{Need: Need{Elements: 8, Minutes: 20, MemoryMB: 500}, Name: "duskline-ab", Program: "/opt/dusk line/bin's/duskline", Run: "/data/$RUN`x`",
		Folder: "/data/100% sure", Shards: []int{1, 2, 3, 7}, Workers: 4, Partition: "night", Account: "lr", Options: []string{"--qos=low"}}
	script, err := a.ElementScript()
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"#!/bin/bash\n", "\n#SBATCH --array=1-3,7\n", "\n#SBATCH --cpus-per-task=4\n", "\n#SBATCH --mem=500M\n", "\n#SBATCH --time=20\n",
		"\n#SBATCH --partition=night\n", "\n#SBATCH --account=lr\n", "\n#SBATCH --qos=low\n", "\n#SBATCH --output=\"/data/100%% sure/array-%A_%a.log\"\n"} {
		if !strings.Contains(script, want) {
			t.Errorf("the script lacks %q:\n%s", want, script)
		}
	}
	// The command as a shell takes it apart.
	line := script[strings.LastIndex(strings.TrimSpace(script), "\n")+1:]
	command := strings.TrimSpace(strings.TrimPrefix(line, "exec "))
	out, err := exec.Command("/bin/sh", "-c", "SLURM_ARRAY_TASK_ID=3; for w in "+command+"; do echo \"<$w>\"; done").CombinedOutput()
	words := strings.Fields(strings.ReplaceAll(string(out), "dusk line", "dusk_line"))
	want := []string{"</opt/dusk_line/bin's/duskline>", "<run>", "<--out>", "</data/$RUN`x`>", "<--shard>", "<3/8>", "<--workers>", "<4>", "<--quiet>", "<--log-format>", "<json>"}
	if err != nil || !slices.Equal(words, want) {
		t.Errorf("the shell sees %q, %v", words, err)
	}
	if gather, err := a.GatherScript(); err != nil || !strings.Contains(gather, "gather --log-format json '/data/$RUN`x`'\n") || strings.Contains(gather, "--array") {
		t.Errorf("gather script %q, %v", gather, err)
	}
	a.Account = "x\nrm -rf /"
	if _, err := a.ElementScript(); !errors.Is(err, ErrLine) {
		t.Errorf("a line break in a name gives %v", err)
	}
}
