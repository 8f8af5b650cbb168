package pipeline

import (
	"encoding/json"
	"fmt"
	"os"

	"duskline/catalog"
)

// Summary counts what a run came to. It is written as summary.json, with the
// keys of the tags.
type Summary struct {
	Format        string `json:"format"`
	FormatVersion int    `json:"format_version"`
	Program       string `json:"program"`
	Build         string `json:"build"`
	Run           string `json:"run"`      // digest of the plan
	Complete      bool   `json:"complete"` // every block is in the catalogs
	Inputs        int64  `json:"inputs"`   // files of the plan
	Planned       int64  `json:"planned"`  // objects of the plan
	counts
	InternalErrors int64 `json:"internal_errors"`
	RepeatedIDs    int64 `json:"repeated_ids"` // rows that got a number after their object_id
	// What is not in the catalogs because it was not there when they were
	// written; empty for a complete run.
	MissingObjects int64             `json:"missing_objects"`
	MissingBlocks  []int             `json:"missing_blocks,omitempty"`
	Blocks         string            `json:"blocks_digest"` // of all blocks in the catalogs
	Files          map[string]int64  `json:"files"`         // bytes of the catalogs
	Digests        map[string]string `json:"digests"`
}

// counts is what adds up over blocks.
type counts struct {
	Objects    int64                       `json:"objects"`           // rows of the object table
	Lines      int64                       `json:"lines"`             // rows of the line table
	Absorbers  int64                       `json:"absorbers"`         // rows of the absorber table
	Indices    int64                       `json:"indices,omitempty"` // rows of the table of indices
	Verdicts   map[string]int64            `json:"verdicts"`
	Classes    map[string]map[string]int64 `json:"classes"` // class, then verdict
	Flags      map[string]int64            `json:"flags"`
	Unreadable int64                       `json:"unreadable"`
}

const (
	summaryFormat  = "duskline summary"
	summaryVersion = 1
)

func newSummary(r *Run) *Summary {
	return &Summary{Format: summaryFormat, FormatVersion: summaryVersion, Program: r.head.Program, Build: r.head.Build, Run: r.id,
		Inputs: r.totals.Inputs, Planned: r.totals.Objects, counts: *newCounts(), Digests: r.head.Digests, Files: map[string]int64{}}
}

func newCounts() *counts {
	c := &counts{Verdicts: map[string]int64{}, Classes: map[string]map[string]int64{}, Flags: map[string]int64{}}
	for _, v := range catalog.Verdicts() {
		c.Verdicts[v] = 0
	}
	for _, class := range catalog.Classes() {
		c.Classes[class] = map[string]int64{}
		for _, v := range catalog.Verdicts() {
			c.Classes[class][v] = 0
		}
	}
	for _, f := range catalog.FlagNames() {
		c.Flags[f] = 0
	}
	return c
}

func (c *counts) add(o *catalog.Object) {
	c.Objects++
	c.Verdicts[o.Verdict]++
	c.Classes[o.Class][o.Verdict]++
	for _, f := range o.Flags.Names() {
		c.Flags[f]++
	}
	if o.Flags.Has(catalog.Unreadable) {
		c.Unreadable++
	}
}

// addAll adds the counts of a block.
func (c *counts) addAll(b *counts) {
	c.Objects += b.Objects
	c.Lines += b.Lines
	c.Absorbers += b.Absorbers
	c.Indices += b.Indices
	c.Unreadable += b.Unreadable
	for v, n := range b.Verdicts {
		c.Verdicts[v] += n
	}
	for f, n := range b.Flags {
		c.Flags[f] += n
	}
	for class, verdicts := range b.Classes {
		for v, n := range verdicts {
			c.Classes[class][v] += n
		}
	}
}

func (s *Summary) json() ([]byte, error) {
	b, err := json.MarshalIndent(s, "", "  ")
	return append(b, '\n'), err
}

// ReadSummary reads a summary.json.
func ReadSummary(path string) (*Summary, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	s := &Summary{}
	if err := json.Unmarshal(text, s); err != nil {
		return nil, fmt.Errorf("%s is no summary of a run: %w", path, err)
	}
	if s.Format != summaryFormat || s.FormatVersion != summaryVersion {
		return nil, fmt.Errorf("%s has format %q %d; this program reads %q %d", path, s.Format, s.FormatVersion, summaryFormat, summaryVersion)
	}
	return s, nil
}
