package catalog

import (
	"fmt"
	"strings"
)

// markdownColumns returns the page docs/columns.md: what the columns of
// all tables and the flags mean.
func markdownColumns() string {
	var b strings.Builder
	b.WriteString(`# Columns of the catalog

Generated from the table in package catalog, which also drives the files; a test keeps both in step.
Version of the columns: ` + FormatVersion + `.

The object table is the HDU OBJECTS of catalog.fits, catalog.csv and objects.parquet. The line table is the HDU
LINES of catalog.fits and lines.parquet, the absorber table the HDU ABSORBERS and absorbers.parquet. ` + "`object_id`" + `
joins them. Where the setting lines.indices names a file, the table of indices is the HDU INDICES and indices.parquet.

A number that is not known is NaN in FITS, null in Parquet and an empty field in CSV. Whole numbers and text are
always there; text that is not known is empty. CSV holds the decimals given below, FITS and Parquet the full double.
Wavelengths are in vacuum and in the barycentric frame.

Control characters and bytes that are not UTF-8 are written as escapes such as \n and \xff. FITS text is ASCII: there
all other characters are written as escapes such as \u00e9.
`)
	markdownTable(&b, "Object table", objectColumnsTold())
	markdownTable(&b, "Line table", lineColumnsTold())
	markdownTable(&b, "Absorber table", absorberColumnsTold())
	markdownTable(&b, "Table of indices", indexColumnsTold())
	b.WriteString("\n## Flags\n\nBits of `flags`, low bit first. `flag_names` has the names of those that are set, joined by `|`.\n\n" +
		"| bit | value | name | says |\n|---|---|---|---|\n")
	for bit, f := range flagTable {
		fmt.Fprintf(&b, "| %d | %d | `%s` | %s |\n", bit, 1<<bit, f.name, f.says)
	}
	b.WriteString("\n## Flags of absorbers\n\nBits of `flags` in the absorber table.\n\n| bit | value | name | says |\n|---|---|---|---|\n")
	for bit, f := range absorberFlagTable {
		fmt.Fprintf(&b, "| %d | %d | `%s` | %s |\n", bit, 1<<bit, f.name, f.says)
	}
	return b.String()
}

func markdownTable(b *strings.Builder, title string, columns []Column) {
	fmt.Fprintf(b, "\n## %s\n\n| column | type | unit | decimals | UCD | meaning |\n|---|---|---|---|---|---|\n", title)
	for _, c := range columns {
		places := ""
		if c.Type == "float64" {
			layout, n := decimals(c.Display)
			places = fmt.Sprint(n)
			if layout == 'e' {
				places += ", scientific"
			}
		}
		fmt.Fprintf(b, "| `%s` | %s | %s | %s | `%s` | %s |\n", c.Name, c.Type, c.Unit, places, c.UCD,
			strings.ReplaceAll(c.Description, "|", `\|`))
	}
}

func (t table[T]) public() []Column {
	out := make([]Column, len(t.columns))
	for i, c := range t.columns {
		out[i] = c.Column
	}
	return out
}

// objectColumnsTold returns the columns of the object table in order.
func objectColumnsTold() []Column { return tableOf[Object]().public() }

// lineColumnsTold returns the columns of the line table in order.
func lineColumnsTold() []Column { return tableOf[Line]().public() }

// absorberColumnsTold returns the columns of the absorber table in order.
func absorberColumnsTold() []Column { return tableOf[Absorber]().public() }

// indexColumnsTold returns the columns of the table of indices in order.
func indexColumnsTold() []Column { return tableOf[Index]().public() }
