package catalog

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// ErrRow is wrapped by every error about a row that breaks the rules of Check.
var ErrRow = errors.New("catalog row")

// Check returns an error that names every rule the row breaks, or nil. Writers
// refuse a row that fails it, so that a wrong row never travels.
//
// No number is infinite; NaN says not known. Errors, widths, limits and counts
// are not negative, confidence is within 0 and 1, right ascension
// within 0 and 360 and declination within -90 and 90 degrees, both known or
// both not, redshifts above -1, wave_min not above wave_max. Class, verdict
// and flags are defined ones. A secure or uncertain verdict has a redshift; an
// unreadable object has the verdict none and a reason.
func Check[T Row](row *T) error {
	t := tableOf[T]()
	return t.verify(row)
}

func (t *table[T]) verify(row *T) error {
	var c checker
	for i := range t.columns {
		if p, ok := t.columns[i].field(row).(*float64); ok && math.IsInf(*p, 0) {
			c.add("%s is infinite; a number that is not known is NaN", t.columns[i].Name)
		}
	}
	switch r := any(row).(type) {
	case *Object:
		c.object(r)
	case *Line:
		c.line(r)
	case *Absorber:
		c.absorber(r)
	case *Index:
		c.index(r)
	}
	return c.err(t.name, textOf(t.columns[0].field(row)))
}

type checker struct{ broken []string }

func (c *checker) add(format string, args ...any) {
	c.broken = append(c.broken, fmt.Sprintf(format, args...))
}

func (c *checker) err(table, id string) error {
	if len(c.broken) == 0 {
		return nil
	}
	return fmt.Errorf("%w: table %s, object %q: %s", ErrRow, table, id, strings.Join(c.broken, "; "))
}

// within accepts NaN.
func (c *checker) within(name string, v, low, high float64) {
	if v < low || v > high {
		c.add("%s = %g, want %g to %g", name, v, low, high)
	}
}

func (c *checker) notNegative(name string, v float64) {
	if v < 0 {
		c.add("%s = %g is negative", name, v)
	}
}

func (c *checker) oneOf(name, v string, known []string) {
	if !slices.Contains(known, v) {
		c.add("%s = %q, want one of %s", name, v, strings.Join(known, ", "))
	}
}

func (c *checker) object(o *Object) {
	if o.ObjectID == "" {
		c.add("object_id is empty")
	}
	c.notNegative("source_row", float64(o.SourceRow))
	c.within("ra", o.RA, 0, 360)
	c.within("dec", o.Dec, -90, 90)
	if math.IsNaN(o.RA) != math.IsNaN(o.Dec) {
		c.add("one of ra and dec is known without the other")
	}
	c.oneOf("class", o.Class, Classes())
	c.oneOf("verdict", o.Verdict, Verdicts())
	if bad := o.Flags &^ knownFlags; bad != 0 {
		c.add("flags has undefined bits %#x", uint32(bad))
	}
	for _, z := range []struct {
		name string
		v    float64
	}{{"redshift", o.Redshift}, {"rival_redshift", o.RivalRedshift}} {
		if z.v <= -1 {
			c.add("%s = %g, want above -1", z.name, z.v)
		}
	}
	c.notNegative("redshift_err", o.RedshiftErr)
	c.within("confidence", o.Confidence, 0, 1)
	if (o.Verdict == Secure || o.Verdict == Uncertain) && math.IsNaN(o.Redshift) {
		c.add("verdict %s without a redshift", o.Verdict)
	}
	c.notNegative("lines_seen", float64(o.LinesSeen))
	c.notNegative("pixels_used", float64(o.PixelsUsed))
	c.notNegative("wave_min", o.WaveMin)
	if o.WaveMin > o.WaveMax {
		c.add("wave_min = %g is above wave_max = %g", o.WaveMin, o.WaveMax)
	}
	c.notNegative("chi2_dof", o.Chi2Dof)
	if o.Flags.Has(Unreadable) && (o.Verdict != None || o.Reason == "") {
		c.add("an unreadable object needs the verdict none and a reason")
	}
}

func (c *checker) line(l *Line) {
	if l.ObjectID == "" {
		c.add("object_id is empty")
	}
	if l.Line == "" {
		c.add("line is empty")
	}
	if !(l.RestWave > 0) {
		c.add("rest_wave = %g, want positive", l.RestWave)
	}
	c.notNegative("ew_rest_err", l.EWRestErr)
	c.notNegative("ew_sum_err", l.EWSumErr)
	c.notNegative("flux_err", l.FluxErr)
	c.notNegative("offset_err", l.OffsetErr)
	c.notNegative("width_kms", l.WidthKms)
	c.notNegative("width_err", l.WidthErr)
	c.notNegative("upper_limit", l.UpperLimit)
	c.notNegative("pixels", float64(l.Pixels))
}
