package pipeline

import (
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"github.com/google/renameio/v2"
)

// The catalogs that a person opens.
const (
	CatalogFITS = "catalog.fits" // tables OBJECTS and LINES
	CatalogCSV  = "catalog.csv"  // the object table
)

// The other files of a run folder beside the plan.
const (
	settingsName  = "plan.toml"    // settings that the results depend on, for people
	blocksName    = "blocks"       // one folder a finished block
	unfinished    = ".unfinished-" // begins the name of what is not whole yet
	objectsName   = "objects.parquet"
	linesName     = "lines.parquet"
	absorbersName = "absorbers.parquet"
	indicesName   = "indices.parquet"
	summaryName   = "summary.json"
)

// tableNames are the files of a block beside its note; indicesName comes to them
// in runs that have indices.
var tableNames = [...]string{objectsName, linesName, absorbersName}

// hasIndices reports whether the run has a table of indices.
func (r *Run) hasIndices() bool { return r.head.Digests[IndicesDigest] != "" }

// blockFiles lists the files of a block beside its note.
func (r *Run) blockFiles() []string {
	if r.hasIndices() {
		return append(tableNames[:len(tableNames):len(tableNames)], indicesName)
	}
	return tableNames[:]
}

// catalogFiles lists the files that Gather writes, beside the summary.
func (r *Run) catalogFiles() []string {
	if r.hasIndices() {
		return append(catalogNames[:len(catalogNames):len(catalogNames)], indicesName)
	}
	return catalogNames[:]
}

// LogFile returns the path of the log of a run, of its own for a shard: not
// every file system lets several machines append to one. It is kept out of the
// other files because times are in it: their bytes depend on the inputs alone.
func (r *Run) LogFile() string {
	name := "run.log"
	if s := r.job.Shard; !s.Whole() {
		name = fmt.Sprintf("run.%dof%d.log", s.Index, s.Count)
	}
	return filepath.Join(r.out, name)
}

// createUnfinished makes a file that is renamed or linked when it is whole.
func createUnfinished(folder, what string) (*os.File, error) {
	name := filepath.Join(folder, unfinished+what+"-"+rand.Text())
	return os.OpenFile(name, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
}

// writeAtomic replaces a file by what write makes, or leaves it as it was.
func writeAtomic(path string, write func(w io.Writer) error) error {
	f, err := renameio.NewPendingFile(path, renameio.WithTempDir(filepath.Dir(path)), renameio.WithPermissions(0o666))
	if err != nil {
		return cannotWrite(path, err)
	}
	defer f.Cleanup()
	if err := write(f); err != nil {
		return cannotWrite(path, err)
	}
	if err := f.CloseAtomicallyReplace(); err != nil {
		return cannotWrite(path, err)
	}
	return syncFolder(filepath.Dir(path))
}

func cannotWrite(path string, err error) error {
	var in *fs.PathError
	if errors.As(err, &in) {
		err = in.Err // the path there is that of a temporary file
	}
	return fmt.Errorf("%s cannot be written: %w; make room or mend the folder, then repeat the command", path, err)
}

// syncFolder makes renames inside a folder last.
func syncFolder(path string) error {
	d, err := os.Open(path)
	if err != nil {
		return err
	}
	defer d.Close()
	if err := d.Sync(); err != nil {
		return fmt.Errorf("folder %s cannot be synced: %w", path, err)
	}
	return nil
}
