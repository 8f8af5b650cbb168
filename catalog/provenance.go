package catalog

import (
	"fmt"
	"maps"
	"slices"

	"duskline/internal/fitsout"
)

// Fact is one thing that is known of how a catalog was made.
type Fact struct {
	Keyword string // in the FITS header, 1 to 8 of A-Z 0-9 _ -
	Name    string // in Parquet metadata
	Value   string
	Says    string // comment in the FITS header, a few words
}

// Provenance says how a catalog was made. It travels in the primary header of
// the FITS file and in the metadata of the Parquet files. It must not hold
// times, names of machines or paths where repeated runs are to give equal
// bytes.
type Provenance []Fact

// NewProvenance records the version of the program and the digests of all that
// the answers depend on (name to digest), in order of their names.
func NewProvenance(version string, digests map[string]string) Provenance {
	p := Provenance{
		{"CREATOR", "creator", "duskline " + version, "program and its version"},
		{"FORMVERS", "format_version", FormatVersion, "version of the columns"},
	}
	for i, name := range slices.Sorted(maps.Keys(digests)) {
		p = append(p, Fact{fmt.Sprintf("DIGEST%d", i+1), "digest." + name, digests[name], "digest of " + name})
	}
	return p
}

// FormatVersion counts changes of the columns that a reader could notice.
const FormatVersion = "1"

func (p Provenance) header() *fitsout.Header {
	h := &fitsout.Header{}
	for _, f := range p {
		h.Text(f.Keyword, fitsout.ASCII(f.Value), fitsout.ASCII(f.Says))
	}
	return h
}
