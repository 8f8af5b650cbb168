// Package pipeline takes a night of spectra from files to catalogs.
//
// A run goes in three steps:
//
//  1. Prepare finds the inputs, counts their spectra, and freezes them with the
//     settings and the digests of templates and line list in a plan; or it finds
//     the plan of a run that was begun and makes sure that nothing differs.
//  2. Work cuts the plan into blocks of equal size and does those of its shard
//     that are not there. Workers take single objects; a block is written under a
//     temporary name, synced and renamed when its last object is done. The blocks
//     are the journal: there or not there. Rows that a change cannot have touched
//     are taken over from an earlier run (Job.Like).
//  3. Gather joins the blocks, in order, into the catalogs and a summary.
//
// On disk:
//
//	RUN/plan.jsonl           head, a line an input, end with totals
//	RUN/plan.toml            the settings of the plan, for people
//	RUN/blocks/000000/       objects.parquet, lines.parquet, absorbers.parquet, block.json with their digests
//	RUN/catalog.fits         tables OBJECTS, LINES and ABSORBERS
//	RUN/indices.parquet      and INDICES, where the setting lines.indices asks for them
//	RUN/catalog.csv          the object table
//	RUN/objects.parquet      RUN/lines.parquet  RUN/absorbers.parquet
//	RUN/summary.json         counts and digests
//	RUN/run.log              times and messages; with what cmd writes for monitoring all that differs from run to run
//	RUN/.unfinished-*        what is not whole yet, or was left by a command that was killed
//
// Promises, each with a test: the same bytes for any number of workers and
// shards, after any interruption, when several commands work on one run, and
// when rows are taken over; an object that cannot be read, that makes the
// program panic, or that comes out with numbers a catalog must not hold is a row
// with its reason and never ends the run; a file that changed since the plan is
// a row that says so; damaged blocks are noticed by their digest and done again;
// memory does not grow with the number of objects, files, folders, entries of the
// manifest or rows of an earlier run: what is too much goes to files without names
// (package spill), but for some twenty bytes a block and one an entry of the manifest.
//
// The science of one object is behind Processor; Chain is the real one. Only
// this package starts goroutines for work.
package pipeline
