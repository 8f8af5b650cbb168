package pipeline

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"os"

	"duskline/catalog"
	"duskline/configs"
	"duskline/lines"
	"duskline/redshift"
)

// builtInIndices is the word for the indices that come with the program.
const builtInIndices = "built-in"

// readIndices reads the file that the setting lines.indices names.
func (c *Chain) readIndices() error {
	name := c.set.Lines.Indices
	if name == "" {
		return nil
	}
	text := configs.Indices()
	if name != builtInIndices {
		var err error
		if text, err = os.ReadFile(name); err != nil {
			return inputError("lines.indices: %s; name a TOML file of indices, or %q", plain(err), builtInIndices)
		}
	}
	var err error
	if c.indices, err = lines.ParseIndices(text); err != nil {
		return inputError("lines.indices, %s: %s", name, err)
	}
	sum := sha256.Sum256(text)
	c.digests[IndicesDigest] = hex.EncodeToString(sum[:])[:16]
	return nil
}

// indexRows measures the indices at the redshift found, all that the arms
// cover. It reads the arms that measure has filled.
func (b *Bench) indexRows(res *redshift.Result) []catalog.Index {
	if len(b.chain.indices) == 0 || !b.level.ready {
		return nil
	}
	var rows []catalog.Index
	for i := range b.chain.indices {
		ix := &b.chain.indices[i]
		value, err := ix.Measure(b.arms, res.Redshift)
		if math.IsNaN(value) {
			continue // not covered
		}
		unit := "Angstrom"
		switch {
		case ix.Break:
			unit = "ratio"
		case ix.Magnitude:
			unit = "mag"
		}
		rows = append(rows, catalog.Index{Index: ix.Name, Unit: unit, Value: value, ValueErr: err})
	}
	return rows
}
