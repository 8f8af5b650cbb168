package main

import "testing"

// The variables are those of the manuals: sbatch(1) of Slurm 22.05, submit(1)
// of Grid Engine 6, bsub of LSF 10 (names from memory but for Slurm).
func TestShardOfAnArray(t *testing.T) {
	for _, k := range []struct {
		env  map[string]string
		want string // empty for an error
	}{
		{map[string]string{"SLURM_ARRAY_TASK_ID": "0", "SLURM_ARRAY_TASK_MIN": "0", "SLURM_ARRAY_TASK_MAX": "7", "SLURM_ARRAY_TASK_STEP": "1", "SLURM_ARRAY_TASK_COUNT": "8"}, "0/8"},
		{map[string]string{"SLURM_ARRAY_TASK_ID": "14", "SLURM_ARRAY_TASK_MIN": "10", "SLURM_ARRAY_TASK_MAX": "18", "SLURM_ARRAY_TASK_STEP": "2", "SLURM_ARRAY_TASK_COUNT": "5"}, "2/5"},
		{map[string]string{"SLURM_ARRAY_TASK_ID": "3", "SLURM_ARRAY_TASK_MIN": "1", "SLURM_ARRAY_TASK_MAX": "7", "SLURM_ARRAY_TASK_COUNT": "3"}, ""}, // 1,3,7
		{map[string]string{"SLURM_ARRAY_TASK_ID": "x", "SLURM_ARRAY_TASK_MIN": "1", "SLURM_ARRAY_TASK_MAX": "7"}, ""},
		{map[string]string{"SGE_TASK_ID": "1", "SGE_TASK_FIRST": "1", "SGE_TASK_LAST": "4", "SGE_TASK_STEPSIZE": "1"}, "0/4"},
		{map[string]string{"SGE_TASK_ID": "undefined"}, ""},
		{map[string]string{"LSB_JOBINDEX": "9", "LSB_JOBINDEX_END": "9"}, "8/9"},
		{map[string]string{"LSB_JOBINDEX": "0"}, ""}, // a job that is no array
		{map[string]string{"LSB_JOBINDEX": "9", "LSB_JOBINDEX_END": "8"}, ""},
		{nil, ""},
	} {
		s, err := shardOf("array", func(name string) string { return k.env[name] })
		if k.want == "" && err == nil || k.want != "" && (err != nil || s.String() != k.want) {
			t.Errorf("%v: shard %q, %v, want %q", k.env, s, err, k.want)
		}
	}
}
