// Package pipeline takes a night of spectra from files to catalogs.
//
// A run goes in three steps:
//
//  1. Prepare finds the inputs, counts their spectra, and freezes them with the
//     settings and the digests of templates and line list in a plan; or it finds
//     the plan of a run that was begun and makes sure that nothing differs.
//  2. Work cuts the plan into blocks of equal size and does those that are not
//     there. Workers take single objects; a block is written under a temporary
//     name, synced and renamed when its last object is done. The blocks are the
//     journal: there or not there.
//  3. Gather joins the blocks, in order, into the catalogs and a summary.
//
// On disk:
//
//	RUN/plan.jsonl           head, a line an input, end with totals
//	RUN/plan.toml            the settings of the plan, for people
//	RUN/blocks/000000/       objects.parquet, lines.parquet, block.json with their digests
//	RUN/catalog.fits         tables OBJECTS and LINES
//	RUN/catalog.csv          the object table
//	RUN/objects.parquet      RUN/lines.parquet
//	RUN/summary.json         counts and digests
//	RUN/run.log              times and messages, the only file that differs from run to run
//
// Promises, each with a test: the same bytes for any number of workers, after
// any interruption, and when several commands work on one run; an object that
// cannot be read, that makes the program panic, or that comes out with numbers a
// catalog must not hold is a row with its reason and never ends the run; a file
// that changed since the plan is a row that says so; damaged blocks are noticed
// by their digest and done again; memory does not grow with the number of
// objects, except for eight bytes of each object_id while gathering.
//
// The science of one object is behind Processor; Chain is the real one. Only
// this package starts goroutines for work.
package pipeline
