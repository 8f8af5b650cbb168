package pipeline

import (
	"context"
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"duskline/internal/spill"
)

// yieldWalked yields a file of a folder that is walked once. Nothing is noted
// of it: a survey has millions.
func (f *finder) yieldWalked(real, path string) error {
	if _, seen, err := f.files.Get(spill.KeyOf(real)); seen || err != nil {
		return err
	}
	return f.yield(candidate{path: path})
}

func (f *finder) yieldOnce(real string, c candidate) error {
	if isNew, err := f.files.Put(spill.KeyOf(real), spill.Value{}); !isNew || err != nil {
		return err
	}
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
	if real == f.out || IsRun(real) {
		return nil
	}
	if isNew, err := f.folders.Put(spill.KeyOf(real), spill.Value{}); !isNew || err != nil {
		return err
	}
	names, err := f.list(real)
	if err != nil {
		return f.yieldOnce(real, candidate{folder, "folder cannot be listed: " + plain(err)})
	}
	defer names.Close()
	return names.Each(func(entry string) error {
		name, kind, _ := strings.Cut(entry, "\x00")
		if strings.HasPrefix(name, ".") {
			return nil
		}
		path := filepath.Join(folder, name)
		switch {
		case kind == kindFolder:
			return f.walk(ctx, path)
		case kind == kindLink:
			return f.follow(ctx, path)
		case isSpectrumName(name):
			return f.yieldWalked(filepath.Join(real, name), path)
		}
		return nil
	})
}

// What stands behind a name in a listing, after a zero byte, which sorts before
// anything in a name.
const (
	kindFolder = "d"
	kindLink   = "l"
	kindOther  = "o"
)

// list reads the names in a folder.
func (f *finder) list(real string) (*spill.Sorter, error) {
	d, err := os.Open(real)
	if err != nil {
		return nil, err
	}
	defer d.Close()
	names := &spill.Sorter{Folder: f.files.Folder}
	for {
		entries, err := d.ReadDir(1024)
		for _, e := range entries {
			kind := kindOther
			switch {
			case e.IsDir():
				kind = kindFolder
			case e.Type()&fs.ModeSymlink != 0:
				kind = kindLink
			}
			if err := names.Add(e.Name() + "\x00" + kind); err != nil {
				names.Close()
				return nil, err
			}
		}
		if errors.Is(err, io.EOF) {
			return names, nil
		}
		if err != nil {
			names.Close()
			return nil, err
		}
	}
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

func hasPattern(path string) bool { return strings.ContainsAny(path, `*?[\`) }

// glob visits what a pattern names, folder by folder in order of names. Each
// part between slashes is matched as filepath.Match does; a folder that cannot
// be listed matches nothing.
func (f *finder) glob(ctx context.Context, pattern string, visit func(path string) error) error {
	folder, last := filepath.Split(pattern)
	if folder != "" && folder != "/" {
		folder = filepath.Clean(folder)
	}
	if !hasPattern(folder) {
		return f.match(ctx, folder, last, visit)
	}
	return f.glob(ctx, folder, func(path string) error { return f.match(ctx, path, last, visit) })
}

// match visits the names in a folder that match.
func (f *finder) match(ctx context.Context, folder, pattern string, visit func(path string) error) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	if !hasPattern(pattern) {
		path := filepath.Join(folder, pattern)
		if _, err := os.Lstat(f.locate(path)); err != nil {
			return nil
		}
		return visit(path)
	}
	names, err := f.list(f.locate(folder))
	if err != nil {
		return nil
	}
	defer names.Close()
	return names.Each(func(entry string) error {
		name, _, _ := strings.Cut(entry, "\x00")
		if ok, err := filepath.Match(pattern, name); !ok || err != nil {
			return err
		}
		return visit(filepath.Join(folder, name))
	})
}

func escapePattern(s string) string {
	return strings.NewReplacer(`\`, `\\`, `*`, `\*`, `?`, `\?`, `[`, `\[`).Replace(s)
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
