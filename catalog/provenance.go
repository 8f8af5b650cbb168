package catalog

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"duskline/internal/fitsout"
)

// Fact is one thing that is known of how a catalog was made.
type Fact struct {
	Keyword string // in the FITS header, 1 to 8 of A-Z 0-9 _ -; empty for facts of Parquet alone
	Name    string // in Parquet metadata; empty for facts of FITS alone
	Value   string
	Says    string // comment in the FITS header, a few words
}

// Provenance says how a catalog was made. It travels in the primary header of
// the FITS file and in the metadata of the Parquet files. It must not hold
// times, names of machines or paths where repeated runs are to give equal
// bytes.
type Provenance []Fact

// Origin is what the rows of a catalog depend on beside the inputs, whose
// digests stand in the rows.
type Origin struct {
	Program  string            // version
	Build    string            // which binary; may be empty
	Run      string            // digest of the plan; may be empty
	Settings string            // effective settings as TOML; may be empty
	Keys     []string          // the same, "section.key = value" each
	Digests  map[string]string // of recipes, line list and the like, by name
	Missing  string            // what of the plan is not in the catalog; empty if nothing
}

// NewProvenance records an origin, digests in order of their names. In FITS
// every setting is a card of its own; Parquet has the whole text under
// "settings".
func NewProvenance(o Origin) Provenance {
	p := Provenance{
		{"CREATOR", "creator", "duskline " + o.Program, "program and its version"},
		{"FORMVERS", "format_version", FormatVersion, "version of the columns"},
	}
	for _, f := range []Fact{
		{"BUILD", "build", o.Build, "binary of the program"},
		{"RUN", "run", o.Run, "digest of the plan"},
		{"MISSING", "missing", o.Missing, "not in this catalog"},
		{"", "settings", o.Settings, ""},
	} {
		if f.Value != "" {
			p = append(p, f)
		}
	}
	for i, name := range slices.Sorted(maps.Keys(o.Digests)) {
		p = append(p, Fact{fmt.Sprintf("DIGEST%d", i+1), "digest." + name, o.Digests[name], "digest of " + name})
	}
	for i, key := range o.Keys {
		p = append(p, Fact{fmt.Sprintf("SET%d", i+1), "", strings.TrimSpace(key), ""})
	}
	return p
}

// FormatVersion counts changes of the columns that a reader could notice.
const FormatVersion = "1"

func (p Provenance) header() *fitsout.Header {
	h := &fitsout.Header{}
	for _, f := range p {
		if f.Keyword != "" {
			h.Text(f.Keyword, fitsout.ASCII(f.Value), fitsout.ASCII(f.Says))
		}
	}
	return h
}
