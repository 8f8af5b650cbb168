package pipeline

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"maps"
	"math"
	"slices"

	"duskline/internal/fitsout"
	"duskline/redshift"
)

// stackVersion counts changes of the file of a composite.
const stackVersion = 1

// write writes the composite: the primary header with the provenance, the table
// COMPOSITE, and the table OBJECTS with every object that is in it.
func (st *stacker) write(ctx context.Context, sums *stackSums, first, last int) error {
	out := locate(st.job.Base, st.job.Out)
	sum := sha256.New()
	// The digest of the inputs stands before the table of them.
	if err := st.eachWritten(func(m *member) error {
		fmt.Fprintf(sum, "%s %d %s\n", m.object.InputDigest, m.object.SourceRow, m.object.ObjectID)
		return ctx.Err()
	}); err != nil {
		return err
	}
	digest := hex.EncodeToString(sum.Sum(nil)[:8])
	return writeAtomic(out, func(w io.Writer) error {
		file, ok := w.(io.WriteSeeker)
		if !ok {
			panic("pipeline: an atomic file that cannot seek")
		}
		fw, err := fitsout.NewWriter(file)
		if err != nil {
			return err
		}
		if err := fw.Empty(st.header(digest)); err != nil {
			return err
		}
		if err := st.writeComposite(fw, sums, first, last); err != nil {
			return err
		}
		if err := st.writeMembers(fw); err != nil {
			return err
		}
		return fw.Close()
	})
}

// eachWritten visits the members that are listed in the file: all that were
// asked for and not left out by name.
func (st *stacker) eachWritten(visit func(m *member) error) error {
	return st.eachMember(func(m *member) error {
		if m.named || st.lost[m.row] {
			return nil
		}
		return visit(m)
	})
}

func (st *stacker) header(inputs string) *fitsout.Header {
	h := &fitsout.Header{}
	text := func(key, value, says string) { h.Text(key, fitsout.ASCII(value), says) }
	text("CREATOR", "duskline "+st.job.Program, "program and its version")
	text("CONTENT", "rest-frame composite", "spectra over continuum, at rest")
	h.Int("FORMVERS", stackVersion, "version of this file")
	text("FAMILY", st.job.Family, "template family of the objects")
	text("OBJCLASS", st.job.Class, "class of the objects")
	h.Int("NOBJECTS", int64(st.report.Objects), "objects in the composite")
	h.Int("NEXCLUDE", int64(st.report.Excluded), "objects left out by name")
	h.Int("NLOST", int64(st.report.Unreadable+st.report.Unfit), "objects that could not be used")
	h.Float("MINSNR", st.job.MinSNR, "least S/N a pixel of the objects")
	h.Float("CLIP", st.job.Clip, "sigmas beyond which pixels are left out")
	h.Int("CLIPNUM", clipRounds, "rounds of clipping")
	h.Int("MINOBJ", int64(st.job.MinObjects), "objects that a pixel needs")
	h.Float("MAXERR", st.job.MaxError, "error from noise that a pixel may have")
	h.Float("EQUALERR", equalError, "least error of a pixel of an object")
	h.Float("LOGSTEP", redshift.CompositeStep, "dex a pixel")
	text("EXCLUDED", st.job.ExcludeDigest, "digest of the list of excluded names")
	text("INPUTS", inputs, "digest of the spectra stacked")
	text("PLAN", st.planID, "digest of the plan of the run")
	text("RUNBY", "duskline "+st.head.Program, "program of the run")
	for i, name := range slices.Sorted(maps.Keys(st.head.Digests)) {
		text(fmt.Sprintf("DIGEST%d", i+1), st.head.Digests[name], fitsout.ASCII("digest of "+name))
	}
	return h
}

func (st *stacker) writeComposite(fw *fitsout.Writer, sums *stackSums, first, last int) error {
	h := &fitsout.Header{}
	h.Text("AIRORVAC", "vac", "wavelengths are in vacuum")
	t, err := fw.Table(h, "COMPOSITE", []fitsout.Column{
		{Name: "wavelength_rest", Kind: fitsout.Float64, Unit: "Angstrom", UCD: "em.wl", Display: "F12.5", Comment: "rest wavelength, vacuum"},
		{Name: "flux", Kind: fitsout.Float32, UCD: "phot.flux.density;em.wl", Comment: "mean flux over continuum"},
		{Name: "error", Kind: fitsout.Float32, UCD: "stat.error;phot.flux.density;em.wl", Comment: "one-sigma error of the mean"},
		{Name: "scatter", Kind: fitsout.Float32, UCD: "stat.stdev", Comment: "weighted standard deviation of the objects, noise included"},
		{Name: "objects", Kind: fitsout.Int32, UCD: "meta.number", Comment: "objects at this wavelength"},
	})
	if err != nil {
		return err
	}
	for j := first; j < last; j++ {
		mean, scatter := sums.at(j)
		sigma := math.NaN()
		if sums.known(j, st.job.MinObjects, st.job.MaxError) {
			sigma = sums.errorOf(j)
		} else {
			mean, scatter = math.NaN(), math.NaN()
		}
		t.Float(sums.wave(j))
		t.Float(mean)
		t.Float(sigma)
		t.Float(scatter)
		t.Int(int64(sums.n[j]))
		if err := t.EndRow(); err != nil {
			return err
		}
	}
	return t.Close()
}

func (st *stacker) writeMembers(fw *fitsout.Writer) error {
	t, err := fw.Table(nil, "OBJECTS", []fitsout.Column{
		{Name: "object_id", Kind: fitsout.Text, Repeat: st.idLen, UCD: "meta.id;meta.main"},
		{Name: "source_file", Kind: fitsout.Text, Repeat: st.path, UCD: "meta.id;meta.file"},
		{Name: "source_row", Kind: fitsout.Int64, UCD: "meta.record"},
		{Name: "redshift", Kind: fitsout.Float64, UCD: "src.redshift", Display: "F12.7"},
		{Name: "snr", Kind: fitsout.Float64, UCD: "stat.snr", Display: "F10.3"},
		{Name: "input_digest", Kind: fitsout.Text, Repeat: 16, UCD: "meta.version;meta.file"},
	})
	if err != nil {
		return err
	}
	if err := st.eachWritten(func(m *member) error {
		t.Text(fitsout.ASCII(m.object.ObjectID))
		t.Text(fitsout.ASCII(m.object.SourceFile))
		t.Int(m.object.SourceRow)
		t.Float(m.object.Redshift)
		t.Float(m.object.SNR)
		t.Text(m.object.InputDigest)
		return t.EndRow()
	}); err != nil {
		return err
	}
	return t.Close()
}
