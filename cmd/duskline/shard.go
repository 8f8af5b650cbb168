package main

import (
	"fmt"
	"strconv"

	"duskline/pipeline"
)

// arrayEngine says in which variables an engine for job arrays keeps the number
// of an element and what is known of the others.
type arrayEngine struct {
	name        string
	index       string
	first, last string // an empty first is 1
	step        string
	count       string // elements that were submitted; empty: unknown
}

// arrayEngines are tried in order.
var arrayEngines = []arrayEngine{
	{name: "Slurm", index: "SLURM_ARRAY_TASK_ID", first: "SLURM_ARRAY_TASK_MIN", last: "SLURM_ARRAY_TASK_MAX",
		step: "SLURM_ARRAY_TASK_STEP", count: "SLURM_ARRAY_TASK_COUNT"},
	{name: "Grid Engine", index: "SGE_TASK_ID", first: "SGE_TASK_FIRST", last: "SGE_TASK_LAST", step: "SGE_TASK_STEPSIZE"},
	{name: "LSF", index: "LSB_JOBINDEX", last: "LSB_JOBINDEX_END", step: "LSB_JOBINDEX_STEP"},
}

// shardOf reads the shard of a command: "I/N", "array" for that of a job array,
// or empty for the whole run.
func shardOf(text string, getenv func(string) string) (pipeline.Shard, error) {
	switch text {
	case "":
		return pipeline.Shard{}, nil
	case "array":
		return arrayShard(getenv)
	}
	return pipeline.ParseShard(text)
}

func arrayShard(getenv func(string) string) (pipeline.Shard, error) {
	for _, e := range arrayEngines {
		if text := getenv(e.index); text != "" && text != "undefined" && text != "0" || e.name == "Slurm" && text == "0" {
			return e.shard(getenv)
		}
	}
	return pipeline.Shard{}, &pipeline.InputError{Problems: []string{
		"--shard array: no job array is in the environment; give --shard I/N or set DUSKLINE_SHARD to it"}}
}

func (e arrayEngine) shard(getenv func(string) string) (pipeline.Shard, error) {
	fail := func(format string, args ...any) (pipeline.Shard, error) {
		return pipeline.Shard{}, &pipeline.InputError{Problems: []string{
			fmt.Sprintf("--shard array under %s: %s; give --shard I/N", e.name, fmt.Sprintf(format, args...))}}
	}
	number := map[string]int{}
	for _, v := range []struct {
		name     string
		standard int
	}{{e.index, -1}, {e.first, 1}, {e.last, -1}, {e.step, 1}, {e.count, 0}} {
		if v.name == "" {
			continue
		}
		text := getenv(v.name)
		n, err := strconv.Atoi(text)
		switch {
		case text == "" && v.standard >= 0:
			n = v.standard
		case err != nil || n < 0:
			return fail("%s is %q, not a number", v.name, text)
		}
		number[v.name] = n
	}
	first, step := 1, max(number[e.step], 1)
	if e.first != "" {
		first = number[e.first]
	}
	index, last := number[e.index], number[e.last]
	if index < first || index > last || (index-first)%step != 0 {
		return fail("element %d is not among %d to %d in steps of %d", index, first, last, step)
	}
	n := (last-first)/step + 1
	if count := number[e.count]; count != 0 && count != n {
		return fail("the array has %d elements from %d to %d, so that not all shards would be done", count, first, last)
	}
	return pipeline.Shard{Index: (index - first) / step, Count: n}, nil
}
