package pipeline

import (
	"bufio"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// The plan is one file of JSON lines: a head, a line an input, and an end line
// that counts them. It is written once, under a temporary name, and linked
// into place when it is whole.
const (
	planName    = "plan.jsonl"
	planFormat  = "duskline plan"
	planVersion = 1
)

// planHead is the first line of a plan: everything beside the inputs that the
// results depend on.
type planHead struct {
	Format    string            `json:"format"`
	Version   int               `json:"format_version"`
	Program   string            `json:"program"`
	Build     string            `json:"build,omitempty"`
	Folder    string            `json:"folder"` // relative inputs start here
	BlockSize int               `json:"block_size"`
	Limit     int64             `json:"limit"`    // largest number of spectra, 0 for all
	Digests   map[string]string `json:"digests"`  // recipes, line list, layouts, settings
	Settings  string            `json:"settings"` // essential settings as TOML
	Layouts   []LayoutText      `json:"layouts,omitempty"`
	Recipes   []RecipeText      `json:"recipes,omitempty"`
	Manifest  string            `json:"manifest,omitempty"` // name of its copy in the run folder
}

// planInput is one input file of a plan.
type planInput struct {
	Path string `json:"path"`
	// Raw is the path in bytes when it is not UTF-8; Path is then for people.
	Raw     []byte `json:"raw,omitempty"`
	Rows    int64  `json:"rows"`               // spectra in it that belong to the plan; one for a file with trouble
	Size    int64  `json:"size"`               // bytes
	MTime   int64  `json:"mtime_ns,omitempty"` // modification time, ns since 1970
	Trouble string `json:"trouble,omitempty"`  // why it could not be opened
	// Skip are rows that the manifest leaves out, not counted in Rows. Excluded is
	// true for an input of which nothing is left.
	Skip     []int64 `json:"skip,omitempty"`
	Excluded bool    `json:"excluded,omitempty"`
	entries  []int   // of the manifest that name it
	// Internal is true when the trouble is a defect of the program.
	Internal bool `json:"internal,omitempty"`
}

func newPlanInput(c candidate) planInput {
	in := planInput{Path: c.path, Trouble: c.trouble}
	if !utf8.ValidString(c.path) {
		quoted := strconv.QuoteToASCII(c.path)
		in.Path, in.Raw = quoted[1:len(quoted)-1], []byte(c.path)
	}
	return in
}

// file returns the path to open.
func (in *planInput) file(folder string) string {
	if in.Raw != nil {
		return locate(folder, string(in.Raw))
	}
	return locate(folder, in.Path)
}

// planEnd is the last line of a plan.
type planEnd struct {
	Inputs  int64 `json:"inputs"`
	Objects int64 `json:"objects"`
}

// planLine tells input lines from the end line while reading.
type planLine struct {
	planInput
	End *planEnd `json:"end"`
}

// writePlan writes a plan to w; inputs is called with a function that takes
// the inputs in order and says when enough spectra are listed.
func writePlan(w io.Writer, head planHead, inputs func(take func(planInput) (enough bool, err error)) error) (planEnd, error) {
	buf := bufio.NewWriterSize(w, 1<<16)
	enc := json.NewEncoder(buf)
	enc.SetEscapeHTML(false)
	var end planEnd
	if err := enc.Encode(head); err != nil {
		return end, err
	}
	err := inputs(func(in planInput) (bool, error) {
		if left := head.Limit - end.Objects; head.Limit > 0 && in.Rows > left {
			in.Rows = left
		}
		if in.Rows > 0 || in.Excluded {
			end.Inputs++
			end.Objects += in.Rows
			if err := enc.Encode(in); err != nil {
				return true, err
			}
		}
		return head.Limit > 0 && end.Objects >= head.Limit, nil
	})
	if err != nil {
		return end, err
	}
	if err := enc.Encode(struct {
		End planEnd `json:"end"`
	}{end}); err != nil {
		return end, err
	}
	return end, buf.Flush()
}

// planReader streams a plan.
type planReader struct {
	file *os.File
	buf  *bufio.Reader
	head planHead
	line int
	at   int64 // byte at which the next line begins
}

func openPlan(path string) (*planReader, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	r := &planReader{file: file, buf: bufio.NewReaderSize(file, 1<<16)}
	if err := r.decode(&r.head); err != nil {
		file.Close()
		return nil, err
	}
	if r.head.Format != planFormat {
		file.Close()
		return nil, fmt.Errorf("%s is not a plan of duskline: %w", path, ErrDamaged)
	}
	if r.head.Version != planVersion {
		file.Close()
		return nil, fmt.Errorf("%s has plan format %d and this program reads format %d; use the program that began the run",
			path, r.head.Version, planVersion)
	}
	return r, nil
}

func (r *planReader) decode(dst any) error {
	r.line++
	text, err := r.buf.ReadBytes('\n')
	r.at += int64(len(text))
	if err == nil {
		err = json.Unmarshal(text, dst)
	}
	if err != nil {
		if errors.Is(err, io.EOF) {
			err = io.ErrUnexpectedEOF
		}
		return fmt.Errorf("%s line %d: the plan is %w: %w; begin a new run with another --out", r.file.Name(), r.line, ErrDamaged, err)
	}
	return nil
}

// next returns the next input, or io.EOF and the totals at the end.
func (r *planReader) next() (planInput, planEnd, error) {
	var line planLine
	if err := r.decode(&line); err != nil {
		return planInput{}, planEnd{}, err
	}
	if line.End != nil {
		return planInput{}, *line.End, io.EOF
	}
	return line.planInput, planEnd{}, nil
}

func (r *planReader) Close() error { return r.file.Close() }

// readTotals reads a plan through and returns its head, its totals and the
// digest of its bytes.
func readTotals(path string) (planHead, planEnd, string, error) {
	r, err := openPlan(path)
	if err != nil {
		return planHead{}, planEnd{}, "", err
	}
	defer r.Close()
	var counted planEnd
	for {
		in, end, err := r.next()
		if errors.Is(err, io.EOF) {
			if end != counted {
				return planHead{}, planEnd{}, "", fmt.Errorf("%s is %w: it lists %d inputs and says %d; begin a new run with another --out",
					path, ErrDamaged, counted.Inputs, end.Inputs)
			}
			break
		}
		if err != nil {
			return planHead{}, planEnd{}, "", err
		}
		counted.Inputs++
		counted.Objects += in.Rows
	}
	if _, err := r.file.Seek(0, io.SeekStart); err != nil {
		return planHead{}, planEnd{}, "", err
	}
	sum := sha256.New()
	if _, err := io.Copy(sum, r.file); err != nil {
		return planHead{}, planEnd{}, "", err
	}
	return r.head, counted, hex.EncodeToString(sum.Sum(nil)[:8]), nil
}

// IsRun reports whether a folder holds a plan of ours.
func IsRun(folder string) bool {
	r, err := openPlan(filepath.Join(folder, planName))
	if err != nil {
		return false
	}
	r.Close()
	return true
}

// differences names what differs between two plan heads.
func (h *planHead) differences(want *planHead) []string {
	var out []string
	if h.Program != want.Program {
		out = append(out, fmt.Sprintf("it was begun by version %s and this is %s", h.Program, want.Program))
	}
	if h.Program == want.Program && h.Build != want.Build {
		out = append(out, fmt.Sprintf("it was begun by another build of this version (%s) and this is %s", orNone(h.Build), orNone(want.Build)))
	}
	if h.Limit != want.Limit {
		out = append(out, fmt.Sprintf("its --limit is %s, not %s", limitText(h.Limit), limitText(want.Limit)))
	}
	settings, err := ParseSettings([]byte(h.Settings))
	wanted, wantErr := ParseSettings([]byte(want.Settings))
	if err != nil || wantErr != nil {
		if h.Settings != want.Settings {
			out = append(out, "its settings are of another version")
		}
	} else if keys := settings.Differences(wanted); len(keys) > 0 {
		out = append(out, "settings differ in "+strings.Join(keys, ", "))
	}
	names := slices.Sorted(maps.Keys(h.Digests))
	for _, name := range slices.Sorted(maps.Keys(want.Digests)) {
		if !slices.Contains(names, name) {
			names = append(names, name)
		}
	}
	for _, name := range names {
		if name != settingsDigest && name != calibrationDigest && h.Digests[name] != want.Digests[name] {
			out = append(out, fmt.Sprintf("%s changed (digest %s, now %s)", name, orNone(h.Digests[name]), orNone(want.Digests[name])))
		}
	}
	return out
}

// otherProgram reports whether the plan was made by another program or build.
func (h *planHead) otherProgram(want *planHead) bool {
	return h.Program != want.Program || h.Build != want.Build
}

func orNone(s string) string {
	if s == "" {
		return "none"
	}
	return s
}

func limitText(n int64) string {
	if n == 0 {
		return "none"
	}
	return strconv.FormatInt(n, 10)
}

// checkInputs compares the inputs found now with those of the plan.
func checkInputs(ctx context.Context, path, folder string, find func(yield func(planInput) (bool, error)) error) ([]string, error) {
	r, err := openPlan(path)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	var difference string
	limited := r.head.Limit > 0
	planned, end, err := r.next()
	if err != nil && !errors.Is(err, io.EOF) {
		return nil, err
	}
	atEnd := errors.Is(err, io.EOF)
	err = find(func(now planInput) (bool, error) {
		switch {
		case atEnd && limited:
			return true, nil
		case atEnd:
			difference = fmt.Sprintf("%s is not in its plan of %d inputs", now.Path, end.Inputs)
		case planned.file(r.head.Folder) != now.file(folder):
			difference = fmt.Sprintf("its plan has %s where now there is %s", planned.Path, now.Path)
		case planned.Size != now.Size:
			difference = fmt.Sprintf("%s has now %d bytes and had %d", now.Path, now.Size, planned.Size)
		case planned.MTime != now.MTime:
			difference = now.Path + " was written to since"
		}
		if difference != "" {
			return true, nil
		}
		planned, end, err = r.next()
		if atEnd = errors.Is(err, io.EOF); atEnd {
			err = nil
		}
		return false, err
	})
	if err != nil {
		return nil, err
	}
	if difference == "" && !atEnd {
		difference = planned.Path + " of its plan is gone from the inputs"
	}
	if difference == "" {
		return nil, nil
	}
	return []string{difference}, nil
}

// fillStat sets what the file system says about an input.
func (in *planInput) fillStat(folder string) {
	info, err := os.Stat(in.file(folder))
	switch {
	case err != nil:
		if in.Trouble == "" {
			in.Trouble = "cannot be found: " + plain(err)
		}
	case info.Mode().IsRegular():
		in.Size, in.MTime = info.Size(), info.ModTime().UnixNano()
	case info.Mode()&fs.ModeDir == 0 && in.Trouble == "":
		in.Trouble = "is not a regular file; give a FITS file"
	}
}
