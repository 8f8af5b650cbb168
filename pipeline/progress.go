package pipeline

import "duskline/catalog"

// Progress is told how a run goes on. Its methods are called by one goroutine
// at a time and must return quickly.
type Progress interface {
	// Planning is called after every input that was opened to count its
	// spectra.
	Planning(inputs, spectra int64)
	// Working is called before the first object: how many there are in all
	// and how many of them were found finished.
	Working(total, there int64)
	// Object is called after every object, in order of completion.
	Object(o *catalog.Object)
	// Elsewhere is called when another process finished a block of n objects.
	Elsewhere(n int64)
	// Gathering is called before the catalogs are written.
	Gathering()
}

// silent is the Progress of a job that has none.
type silent struct{}

func (silent) Planning(int64, int64)  {}
func (silent) Working(int64, int64)   {}
func (silent) Object(*catalog.Object) {}
func (silent) Elsewhere(int64)        {}
func (silent) Gathering()             {}
