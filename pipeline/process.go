package pipeline

import (
	"duskline/catalog"
	"duskline/spectrum"
)

// Outcome is all that one object adds to the catalog.
type Outcome struct {
	Object    catalog.Object
	Lines     []catalog.Line
	Absorbers []catalog.Absorber
	Indices   []catalog.Index
}

// Worker holds one worker's scratch. It is used by one goroutine at a time.
type Worker interface {
	// Process measures one spectrum. It is pure in its input: the same
	// spectrum gives the same Outcome whatever was processed before it and
	// whichever worker does it. The spectrum may be changed; the Outcome must
	// not share memory with the worker.
	//
	// The engine fills ObjectID, SourceFile, SourceRow, and InputDigest where
	// they are left empty, and the object_id of every line, absorber
	// and index.
	Process(s *spectrum.Spectrum) Outcome
}

// IndicesDigest is the name of the digest of the file of indices.
const IndicesDigest = "indices"

// Processor is the immutable science of a run, shared by its workers.
type Processor interface {
	NewWorker() Worker
	// Digests identifies everything beside the settings that the answer
	// depends on, such as template recipes and the line list: name to digest.
	// They are frozen in the plan and written into every catalog.
	//
	// The name IndicesDigest says that outcomes have indices; a run then has
	// a table of them.
	Digests() map[string]string
}
