// Package spill keeps maps and sorted lists of any length in bounded memory: what
// is more than a bound goes to a file that has no name, so that nothing is left
// of it however the process ends.
package spill

import (
	"crypto/rand"
	"errors"
	"os"
	"path/filepath"
)

// Prefix begins the names that files have for a moment.
const Prefix = ".unfinished-"

// File makes a file without a name in folder, or in the folder for temporary
// files where that is empty or takes none. Closing it gives its space back.
func File(folder string) (*os.File, error) {
	f, err := unnamed(folder)
	if err == nil {
		return f, nil
	}
	g, err2 := unnamed(os.TempDir())
	if err2 != nil {
		return nil, errors.Join(err, err2)
	}
	return g, nil
}

func unnamed(folder string) (*os.File, error) {
	if folder == "" {
		folder = os.TempDir()
	}
	name := filepath.Join(folder, Prefix+"spill-"+rand.Text())
	f, err := os.OpenFile(name, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return nil, err
	}
	if err := os.Remove(name); err != nil {
		f.Close()
		return nil, err
	}
	return f, nil
}
