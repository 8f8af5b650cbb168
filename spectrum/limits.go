package spectrum

// Limits says where the redshift of an object is to be sought, as somebody knows
// it from elsewhere.
type Limits struct {
	Class      string  // "" for any
	ZMin, ZMax float64 // NaN for no limit
}

// Holds reports whether an answer keeps to the limits, the ends of the range
// included.
func (l *Limits) Holds(class string, z float64) bool {
	return (l.Class == "" || l.Class == class) && !(z < l.ZMin) && !(z > l.ZMax)
}
