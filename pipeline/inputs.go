package pipeline

import (
	"bufio"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// candidate is a file to be taken as input, or a place where one should be.
type candidate struct {
	path    string // as it is written in catalogs: relative to the base folder if it was given so
	trouble string // why it cannot be opened, empty if nothing is known against it
}

// finder turns the PATH arguments of a command into files, in order and each
// once.
type finder struct {
	base    string // folder that relative paths start from
	out     string // run folder, never searched
	folders map[string]bool
	files   map[[16]byte]bool // digests of real paths of files that were named or linked, not found by a walk
	yield   func(candidate) error
}

// findInputs calls yield for every input file:
//
//   - a file, taken whatever its name is;
//   - a folder, walked recursively in order of names; it yields what is called
//     *.fits, *.fit or *.fts, with or without .gz or .fz, in capitals or not; hidden
//     names and finished runs are passed over, links are followed once;
//   - a pattern with *, ? or [ that no file is named after, in order of names;
//   - @list, a text file with one file or folder a line; empty lines and lines
//     that begin with # are passed over.
//
// The same file is yielded once, however often it is named. A path that does
// not exist is a problem of the command and is reported with all others before
// anything is yielded; one that a list names is yielded with its trouble.
func findInputs(ctx context.Context, base, out string, paths []string, yield func(candidate) error) error {
	f := &finder{base: base, folders: map[string]bool{}, files: map[[16]byte]bool{}, yield: yield}
	if real, err := filepath.EvalSymlinks(out); err == nil {
		f.out = real
	}
	var expanded, problems []string
	for _, path := range paths {
		names, err := f.expand(path)
		if err != nil {
			problems = append(problems, err.Error())
		}
		expanded = append(expanded, names...)
	}
	if len(problems) > 0 {
		return &InputError{problems}
	}
	for _, path := range expanded {
		var err error
		if list, ok := strings.CutPrefix(path, "@"); ok {
			err = f.takeList(ctx, list)
		} else {
			err = f.take(ctx, path)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

func (f *finder) locate(path string) string { return locate(f.base, path) }

// locate returns the path to open for a path as written.
func locate(base, path string) string {
	if filepath.IsAbs(path) {
		return path
	}
	return filepath.Join(base, path)
}

// expand checks one argument and resolves a pattern.
func (f *finder) expand(path string) ([]string, error) {
	if list, ok := strings.CutPrefix(path, "@"); ok {
		info, err := os.Stat(f.locate(list))
		if err != nil {
			return nil, fmt.Errorf("the list %s cannot be read: %s; give an existing text file after @", list, plain(err))
		}
		if info.IsDir() {
			return nil, fmt.Errorf("the list %s is a folder; give it without the @", list)
		}
		return []string{path}, nil
	}
	info, err := os.Stat(f.locate(path))
	if err == nil {
		if info.IsDir() && IsRun(f.locate(path)) {
			return nil, fmt.Errorf("%s is a run of duskline, not a folder of spectra; give the folder the spectra are in", path)
		}
		return []string{path}, nil
	}
	if strings.ContainsAny(path, "*?[") {
		pattern := path
		if !filepath.IsAbs(path) {
			pattern = filepath.Join(escapePattern(f.base), path)
		}
		matches, err := filepath.Glob(pattern)
		if err != nil {
			return nil, fmt.Errorf("the pattern %s is not valid: a [ has no ]", path)
		}
		if len(matches) == 0 {
			return nil, fmt.Errorf("no file matches %s", path)
		}
		slices.Sort(matches)
		for i, m := range matches {
			if rel, err := filepath.Rel(f.base, m); err == nil && !filepath.IsAbs(path) {
				matches[i] = rel
			}
		}
		return matches, nil
	}
	return nil, fmt.Errorf("%s cannot be read: %s", path, plain(err))
}

func escapePattern(s string) string {
	return strings.NewReplacer(`\`, `\\`, `*`, `\*`, `?`, `\?`, `[`, `\[`).Replace(s)
}

// takeList yields what the lines of a text file name.
func (f *finder) takeList(ctx context.Context, list string) error {
	file, err := os.Open(f.locate(list))
	if err != nil {
		return inputError("the list %s cannot be read: %s", list, plain(err))
	}
	defer file.Close()
	lines := bufio.NewScanner(file)
	for number := 1; lines.Scan(); number++ {
		path := strings.TrimSpace(lines.Text())
		if path == "" || strings.HasPrefix(path, "#") {
			continue
		}
		if err := f.take(ctx, path); err != nil {
			return err
		}
	}
	if err := lines.Err(); err != nil {
		return inputError("the list %s is not a list of files: %s", list, plain(err))
	}
	return nil
}

// take yields a file or everything in a folder.
func (f *finder) take(ctx context.Context, path string) error {
	info, err := os.Stat(f.locate(path))
	switch {
	case err != nil:
		return f.yieldOnce(f.locate(path), candidate{path, "cannot be found: " + plain(err)})
	case info.IsDir():
		return f.walk(ctx, path)
	}
	real, err := filepath.EvalSymlinks(f.locate(path))
	if err != nil {
		real = f.locate(path)
	}
	if f.walked(real) {
		return nil
	}
	return f.yieldOnce(real, candidate{path: path})
}

// walked reports whether a walk yields or has yielded a file by itself.
func (f *finder) walked(real string) bool {
	name := filepath.Base(real)
	return f.folders[filepath.Dir(real)] && isSpectrumName(name) && !strings.HasPrefix(name, ".")
}

// yieldWalked yields a file of a folder that is walked once. Nothing is noted
// of it: a survey has millions.
func (f *finder) yieldWalked(real, path string) error {
	if f.files[pathDigest(real)] {
		return nil
	}
	return f.yield(candidate{path: path})
}

func pathDigest(real string) [16]byte {
	sum := sha256.Sum256([]byte(real))
	return [16]byte(sum[:16])
}

func (f *finder) yieldOnce(real string, c candidate) error {
	key := pathDigest(real)
	if f.files[key] {
		return nil
	}
	f.files[key] = true
	return f.yield(c)
}

// walk yields the spectra of a folder that was not walked before.
func (f *finder) walk(ctx context.Context, folder string) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	real, err := filepath.EvalSymlinks(f.locate(folder))
	if err != nil {
		return f.yieldOnce(f.locate(folder), candidate{folder, "folder cannot be entered: " + plain(err)})
	}
	if f.folders[real] || real == f.out || IsRun(real) {
		return nil
	}
	f.folders[real] = true
	entries, err := os.ReadDir(real)
	if err != nil {
		return f.yieldOnce(real, candidate{folder, "folder cannot be listed: " + plain(err)})
	}
	for _, entry := range entries {
		name := entry.Name()
		if strings.HasPrefix(name, ".") {
			continue
		}
		path := filepath.Join(folder, name)
		switch {
		case entry.IsDir():
			err = f.walk(ctx, path)
		case entry.Type()&fs.ModeSymlink != 0:
			err = f.follow(ctx, path)
		case isSpectrumName(name):
			err = f.yieldWalked(filepath.Join(real, name), path)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// follow yields what a link inside a folder leads to.
func (f *finder) follow(ctx context.Context, path string) error {
	if info, err := os.Stat(f.locate(path)); err == nil && info.IsDir() {
		return f.walk(ctx, path)
	}
	if isSpectrumName(path) {
		return f.take(ctx, path)
	}
	return nil
}

// isSpectrumName reports whether a file of a folder is taken for FITS.
func isSpectrumName(name string) bool {
	name = strings.TrimSuffix(strings.TrimSuffix(strings.ToLower(name), ".gz"), ".fz")
	switch filepath.Ext(name) {
	case ".fits", ".fit", ".fts":
		return true
	}
	return false
}

// plain returns the cause of a file error without the operation and path that
// the message around it names already.
func plain(err error) string {
	var pathErr *fs.PathError
	if errors.As(err, &pathErr) {
		return pathErr.Err.Error()
	}
	return err.Error()
}
