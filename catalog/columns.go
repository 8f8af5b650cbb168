package catalog

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Row is the type of a row: of the object, the line or the absorber table, or
// of the table of indices.
type Row interface {
	Object | Line | Absorber | Index
}

// Column says what one column means. One table of them drives every format.
type Column struct {
	Name        string
	Unit        string // FITS Standard 4.0, section 4.3; empty if there is none
	UCD         string // IVOA UCD1+
	Display     string // FITS TDISP; its decimals are those of CSV
	Description string // one clause
	Type        string // "text", "int32", "int64" or "float64"; filled in from the row type
}

// column adds to a Column the way to its field: a pointer to string, int32,
// int64, float64, Flags, AbsorberFlags or a view of flags as text.
type column[T Row] struct {
	Column
	field func(*T) any
}

// flagText is a view of Flags as their names.
type flagText Flags

// table is the name of a row type's table and its columns in order.
type table[T Row] struct {
	name    string
	columns []column[T]
}

// tableOf returns the table of row type T. It is made anew by every call: a
// writer or reader makes it once.
func tableOf[T Row]() table[T] {
	var name string
	var columns any
	switch any(*new(T)).(type) {
	case Object:
		name, columns = "OBJECTS", objectColumns()
	case Line:
		name, columns = "LINES", lineColumns()
	case Absorber:
		name, columns = "ABSORBERS", absorberColumns()
	case Index:
		name, columns = "INDICES", indexColumns()
	}
	t := table[T]{name, columns.([]column[T])}
	row := new(T)
	for i := range t.columns {
		t.columns[i].Type = typeName(t.columns[i].field(row))
	}
	return t
}

func typeName(field any) string {
	switch field.(type) {
	case *string, *flagText, *absorberFlagText:
		return "text"
	case *int32, *Flags, *AbsorberFlags:
		return "int32"
	case *int64:
		return "int64"
	}
	return "float64"
}

// CleanText is the form in which every format holds a text: control characters
// and bytes that are not UTF-8 are written as backslash escapes (\n, \x1b), so
// that a row stays one line and a name can be printed. All other text,
// backslashes too, is left as it is.
func CleanText(s string) string {
	clean := true
	for i := 0; i < len(s) && clean; i++ {
		clean = s[i] >= ' ' && s[i] <= '~'
	}
	if clean {
		return s
	}
	var b strings.Builder
	for i := 0; i < len(s); {
		r, size := utf8.DecodeRuneInString(s[i:])
		switch {
		case r == utf8.RuneError && size == 1:
			b.WriteString(`\x` + hexByte(s[i]))
		case r < ' ' || r >= 0x7f && r < 0xa0:
			quoted := strconv.QuoteRuneToASCII(r)
			b.WriteString(quoted[1 : len(quoted)-1])
		default:
			b.WriteString(s[i : i+size])
		}
		i += size
	}
	return b.String()
}

func hexByte(b byte) string {
	const digits = "0123456789abcdef"
	return string([]byte{digits[b>>4], digits[b&15]})
}

// textOf returns the text of a text field.
func textOf(field any) string {
	switch p := field.(type) {
	case *string:
		return CleanText(*p)
	case *flagText:
		return Flags(*p).String()
	case *absorberFlagText:
		return AbsorberFlags(*p).String()
	}
	panic("catalog: not a text field")
}

// intOf returns the value of an integer field.
func intOf(field any) int64 {
	switch p := field.(type) {
	case *int32:
		return int64(*p)
	case *int64:
		return *p
	case *Flags:
		return int64(*p)
	case *AbsorberFlags:
		return int64(*p)
	}
	panic("catalog: not an integer field")
}

// setText stores a text. Names of flags are not stored but held against the
// flags, which stand before them in the row.
func setText(field any, s string) error {
	switch p := field.(type) {
	case *string:
		*p = s
	case *flagText:
		if want := Flags(*p).String(); s != want {
			return fmt.Errorf("flag names %q, but the flags are %q", s, want)
		}
	case *absorberFlagText:
		if want := AbsorberFlags(*p).String(); s != want {
			return fmt.Errorf("flag names %q, but the flags are %q", s, want)
		}
	}
	return nil
}

func setInt(field any, v int64) {
	switch p := field.(type) {
	case *int32:
		*p = int32(v)
	case *int64:
		*p = v
	case *Flags:
		*p = Flags(v)
	case *AbsorberFlags:
		*p = AbsorberFlags(v)
	}
}

// decimals reads the layout of a Display such as "F10.6" or "E14.6".
func decimals(display string) (layout byte, n int) {
	layout = 'f'
	if display[0] == 'E' {
		layout = 'e'
	}
	_, digits, _ := strings.Cut(display, ".")
	n, err := strconv.Atoi(digits)
	if err != nil {
		panic("catalog: display format " + display)
	}
	return layout, n
}

// appendFloat appends v with the decimals of the column; nothing for NaN, and
// no sign for a zero.
func appendFloat(b []byte, v float64, layout byte, n int) []byte {
	if math.IsNaN(v) {
		return b
	}
	start := len(b)
	b = strconv.AppendFloat(b, v, layout, n, 64)
	if b[start] == '-' && !strings.ContainsAny(string(b[start:]), "123456789") {
		b = append(b[:start], b[start+1:]...)
	}
	return b
}
