package catalog

// Index is one row of the table of indices: a feature of one object between
// fixed bands. Numbers that are not known are NaN.
type Index struct {
	ObjectID string // key into the object table
	Index    string // name in the file of indices
	Unit     string // "Angstrom", "mag" or "ratio"
	Value    float64
	ValueErr float64 // one sigma
}

// IndexUnits lists what an index may be. It returns a new slice.
func IndexUnits() []string { return []string{"Angstrom", "mag", "ratio"} }

func indexColumns() []column[Index] {
	type I = Index
	return []column[I]{
		{Column{Name: "object_id", UCD: "meta.id.parent", Description: "object, key into the object table"},
			func(i *I) any { return &i.ObjectID }},
		{Column{Name: "index", UCD: "meta.id", Description: "name in the file of indices"},
			func(i *I) any { return &i.Index }},
		{Column{Name: "index_unit", UCD: "meta.unit", Description: "Angstrom (equivalent width, positive in absorption), mag, or ratio of red over blue flux"},
			func(i *I) any { return &i.Unit }},
		{Column{Name: "value", UCD: "spect.index", Display: "F12.4", Description: "index in its unit, rest frame"},
			func(i *I) any { return &i.Value }},
		{Column{Name: "value_err", UCD: "stat.error;spect.index", Display: "F12.4", Description: "one-sigma error of value"},
			func(i *I) any { return &i.ValueErr }},
	}
}

func (c *checker) index(i *Index) {
	if i.ObjectID == "" {
		c.add("object_id is empty")
	}
	if i.Index == "" {
		c.add("index is empty")
	}
	c.oneOf("index_unit", i.Unit, IndexUnits())
	c.notNegative("value_err", i.ValueErr)
}
