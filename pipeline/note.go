package pipeline

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"

	"duskline/catalog"
)

const noteName = "block.json"

// blockNote is the file block.json of a finished block: what it belongs to,
// what its files must be, and what gathering must know before it reads them.
type blockNote struct {
	Plan     string `json:"plan"` // digest of the plan
	Block    int    `json:"block"`
	Objects  int    `json:"objects"`
	Internal int    `json:"internal_errors"`
	// IDs are the object_id of the rows, not yet made unique in the run.
	IDs []string `json:"ids"`
	// Rows of the line and of the absorber table for each object, and of the
	// table of indices where there is one.
	LineCounts     []int               `json:"line_counts"`
	AbsorberCounts []int               `json:"absorber_counts"`
	IndexCounts    []int               `json:"index_counts,omitempty"`
	Counts         *counts             `json:"counts"`
	Widths         *catalog.Widths     `json:"widths"`
	Files          map[string]fileNote `json:"files"`
}

// fileNote is what a file must be.
type fileNote struct {
	Size   int64  `json:"size"`
	SHA256 string `json:"sha256"`
}

// newBlockNote describes a block whose files are not written yet.
func newBlockNote(r *Run, b *block) *blockNote {
	note := &blockNote{Plan: r.id, Block: b.number, Objects: len(b.outcomes), Internal: b.internal,
		Counts: newCounts(), Widths: &catalog.Widths{}, Files: map[string]fileNote{}}
	for i := range b.outcomes {
		o := &b.outcomes[i].Object
		note.IDs = append(note.IDs, catalog.CleanText(o.ObjectID))
		note.LineCounts = append(note.LineCounts, len(b.outcomes[i].Lines))
		note.Counts.add(o)
		note.AbsorberCounts = append(note.AbsorberCounts, len(b.outcomes[i].Absorbers))
		note.Counts.Lines += int64(len(b.outcomes[i].Lines))
		note.Counts.Absorbers += int64(len(b.outcomes[i].Absorbers))
		note.Widths.AddObject(o)
		for k := range b.outcomes[i].Lines {
			note.Widths.AddLine(&b.outcomes[i].Lines[k])
		}
		for k := range b.outcomes[i].Absorbers {
			note.Widths.AddAbsorber(&b.outcomes[i].Absorbers[k])
		}
		if r.hasIndices() {
			note.IndexCounts = append(note.IndexCounts, len(b.outcomes[i].Indices))
			note.Counts.Indices += int64(len(b.outcomes[i].Indices))
		}
		for k := range b.outcomes[i].Indices {
			note.Widths.AddIndex(&b.outcomes[i].Indices[k])
		}
	}
	return note
}

// text is the file: the note on one line, then the digest of that line, since
// nothing else would tell a number that was flipped into another.
func (n *blockNote) text() ([]byte, error) {
	line, err := json.Marshal(n)
	if err != nil {
		return nil, err
	}
	return fmt.Appendf(line, "\n%s\n", hexSum(line)), nil
}

func hexSum(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

// readNote reads and checks block.json. The error wraps fs.ErrNotExist if the
// block is not there and ErrDamaged if the note is not as it must be.
func (r *Run) readNote(number int) (*blockNote, error) {
	note, _, err := r.readNoteSum(number)
	return note, err
}

// readNoteSum also returns the digest of the note.
func (r *Run) readNoteSum(number int) (*blockNote, string, error) {
	folder := r.blockFolder(number)
	if _, err := os.Stat(folder); err != nil {
		return nil, "", fmt.Errorf("block %d of %s cannot be read: %w; mend the folder, then repeat the command", number, r.job.Out, err)
	}
	damaged := func(format string, args ...any) (*blockNote, string, error) {
		return nil, "", fmt.Errorf("block %d of %s is %w: %s", number, r.job.Out, ErrDamaged, fmt.Sprintf(format, args...))
	}
	text, err := os.ReadFile(filepath.Join(folder, noteName))
	if err != nil {
		return damaged("%s", plain(err))
	}
	line, sum, _ := bytes.Cut(text, []byte("\n"))
	if string(sum) != hexSum(line)+"\n" {
		return damaged("%s is not as it was written", noteName)
	}
	note := &blockNote{}
	if err := json.Unmarshal(line, note); err != nil {
		return damaged("%s: %s", noteName, err)
	}
	switch {
	case note.Plan != r.id || note.Block != number:
		return damaged("it belongs to block %d of another plan", note.Block)
	case note.Objects != r.blockLen(number) || len(note.LineCounts) != note.Objects ||
		len(note.AbsorberCounts) != note.Objects || len(note.IDs) != note.Objects || r.hasIndices() && len(note.IndexCounts) != note.Objects:
		return damaged("it has %d objects, want %d", note.Objects, r.blockLen(number))
	case note.Counts == nil || note.Widths == nil:
		return damaged("%s lacks counts or widths", noteName)
	}
	return note, string(sum[:len(sum)-1]), nil
}
