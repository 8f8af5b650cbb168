package pipeline

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"duskline/internal/spill"
)

// candidate is a file to be taken as input, or a place where one should be.
type candidate struct {
	path    string // as it is written in catalogs: relative to the base folder if it was given so
	trouble string // why it cannot be opened, empty if nothing is known against it
}

// finder turns the PATH arguments of a command into files, in order and each
// once. Its memory does not grow with their number.
type finder struct {
	base    string    // folder that relative paths start from
	out     string    // run folder, never searched
	folders spill.Map // real paths of folders that were walked
	files   spill.Map // real paths of files that were named or linked, not found by a walk
	yield   func(candidate) error
}

// named is an argument that was looked at.
type named struct {
	path string
	kind byte // 'p' for a path, '@' for a list, '*' for a pattern
}

// findInputs calls yield for every input file:
//
//   - a file, taken whatever its name is;
//   - a folder, walked recursively in order of names; it yields what is called
//     *.fits, *.fit or *.fts, with or without .gz or .fz, in capitals or not; hidden
//     names and finished runs are passed over, links are followed once;
//   - a pattern with *, ? or [ that no file is named after, folder by folder in
//     order of names;
//   - @list, a text file with one file or folder a line; empty lines and lines
//     that begin with # are passed over.
//
// The same file is yielded once, however often it is named. A path that does
// not exist is a problem of the command and is reported with all others before
// anything is yielded; one that a list names is yielded with its trouble.
func findInputs(ctx context.Context, base, out string, paths []string, yield func(candidate) error) (err error) {
	f := &finder{base: base, yield: yield, folders: spill.Map{Folder: out}, files: spill.Map{Folder: out}}
	defer func() { err = errors.Join(err, f.folders.Close(), f.files.Close()) }()
	if real, err := filepath.EvalSymlinks(out); err == nil {
		f.out = real
	}
	var all []named
	var problems []string
	for _, path := range paths {
		n, err := f.look(path)
		if err != nil {
			problems = append(problems, err.Error())
		}
		all = append(all, n)
	}
	if len(problems) > 0 {
		return &InputError{problems}
	}
	for _, n := range all {
		switch n.kind {
		case '@':
			err = f.takeList(ctx, n.path)
		case '*':
			err = f.glob(ctx, n.path, func(path string) error { return f.take(ctx, path) })
		default:
			err = f.take(ctx, n.path)
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

// look finds out what an argument is, and whether it can be used.
func (f *finder) look(path string) (named, error) {
	if list, ok := strings.CutPrefix(path, "@"); ok {
		info, err := os.Stat(f.locate(list))
		if err != nil {
			return named{}, fmt.Errorf("the list %s cannot be read: %s; give an existing text file after @", list, plain(err))
		}
		if info.IsDir() {
			return named{}, fmt.Errorf("the list %s is a folder; give it without the @", list)
		}
		return named{list, '@'}, nil
	}
	info, err := os.Stat(f.locate(path))
	if err == nil {
		if info.IsDir() && IsRun(f.locate(path)) {
			return named{}, fmt.Errorf("%s is a run of duskline, not a folder of spectra; give the folder the spectra are in", path)
		}
		return named{path, 'p'}, nil
	}
	if !strings.ContainsAny(path, "*?[") {
		return named{}, fmt.Errorf("%s cannot be read: %s", path, plain(err))
	}
	if _, err := filepath.Match(path, ""); err != nil {
		return named{}, fmt.Errorf("the pattern %s is not valid: a [ has no ]", path)
	}
	switch err := f.glob(context.Background(), path, func(string) error { return errEnough }); {
	case errors.Is(err, errEnough):
		return named{path, '*'}, nil
	case err != nil:
		return named{}, err
	}
	return named{}, fmt.Errorf("no file matches %s", path)
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
	if walked, err := f.walked(real); walked || err != nil {
		return err
	}
	return f.yieldOnce(real, candidate{path: path})
}

// walked reports whether a walk yields or has yielded a file by itself.
func (f *finder) walked(real string) (bool, error) {
	name := filepath.Base(real)
	_, walked, err := f.folders.Get(spill.KeyOf(filepath.Dir(real)))
	return walked && isSpectrumName(name) && !strings.HasPrefix(name, "."), err
}
