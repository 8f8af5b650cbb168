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
	Format         string                      `json:"format"`
	FormatVersion  int                         `json:"format_version"`
	Program        string                      `json:"program"`
	Inputs         int64                       `json:"inputs"`  // files
	Objects        int64                       `json:"objects"` // rows of the object table
	Lines          int64                       `json:"lines"`   // rows of the line table
	Verdicts       map[string]int64            `json:"verdicts"`
	Classes        map[string]map[string]int64 `json:"classes"` // class, then verdict
	Flags          map[string]int64            `json:"flags"`
	Unreadable     int64                       `json:"unreadable"`
	InternalErrors int64                       `json:"internal_errors"`
	RepeatedIDs    int64                       `json:"repeated_ids"` // rows that got a number after their object_id
	Digests        map[string]string           `json:"digests"`
}

const (
	summaryFormat  = "duskline summary"
	summaryVersion = 1
)

func newSummary(head planHead, totals planEnd) *Summary {
	s := &Summary{Format: summaryFormat, FormatVersion: summaryVersion, Program: head.Program, Inputs: totals.Inputs,
		Digests: head.Digests, Verdicts: map[string]int64{}, Classes: map[string]map[string]int64{}, Flags: map[string]int64{}}
	for _, v := range catalog.Verdicts() {
		s.Verdicts[v] = 0
	}
	for _, c := range catalog.Classes() {
		s.Classes[c] = map[string]int64{}
		for _, v := range catalog.Verdicts() {
			s.Classes[c][v] = 0
		}
	}
	for _, f := range catalog.FlagNames() {
		s.Flags[f] = 0
	}
	return s
}

func (s *Summary) add(o *catalog.Object) {
	s.Objects++
	s.Verdicts[o.Verdict]++
	s.Classes[o.Class][o.Verdict]++
	for _, f := range o.Flags.Names() {
		s.Flags[f]++
	}
	if o.Flags.Has(catalog.Unreadable) {
		s.Unreadable++
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
