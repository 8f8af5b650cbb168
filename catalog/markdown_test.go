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

## Where the tables are

| table | one row | FITS | other files |
|---|---|---|---|
| objects | a spectrum | HDU OBJECTS of catalog.fits | catalog.csv, objects.parquet |
| lines | a line of an object | HDU LINES | lines.parquet |
| absorbers | a system in front of an object | HDU ABSORBERS | absorbers.parquet |
| indices, where the setting lines.indices names a file | an index of an object | HDU INDICES | indices.parquet |

` + "`object_id`" + ` joins them.

## How to read a row

Start with ` + "`verdict`" + `:

| verdict | use it so |
|---|---|
| ` + "`secure`" + ` | the redshift can be used as it stands; ` + "`redshift_err`" + ` is one sigma |
| ` + "`uncertain`" + ` | a best answer that a person should look at; ` + "`flag_names`" + ` and ` + "`reason`" + ` say why |
| ` + "`none`" + ` | no redshift can be told; the number in the row is a guess and must not be used |

A row that is not secure has at least one of the flags that say why:

| the row is not secure, because | flag |
|---|---|
| it could not be read, or too little of it can be used | ` + "`unreadable`, `few_pixels`" + ` |
| nothing stands above the noise | ` + "`faint`" + ` |
| fewer lines stand out than needed | ` + "`few_lines`, with `lone_line` for one, `on_sky_line` where others may be of the air" + ` |
| another answer is nearly as good | ` + "`low_confidence`, with `tied` where the scores are close" + ` |
| the model does not describe the spectrum | ` + "`misfit`, `lines_missing`, `scattered`" + ` |
| the answer lies at an edge | ` + "`range_end`, `outside_limits`" + ` |
| the input lacks what tells a galaxy or quasar | ` + "`normalized`, or `misfit` with `lines_unseen`" + ` |

The other flags speak of the input: ` + "`frame_assumed`, `noise_estimated`, `weights_suspect`, `below_zero`, `unexplained`" + `.
Secure rows may have them, and ` + "`lone_line`, `misfit`, `lines_unseen`, `on_sky_line`, `outside_limits`, `normalized` (stars)" + ` too.

## What is not known

| | FITS | Parquet | CSV |
|---|---|---|---|
| a number that is not known | NaN | null | empty field |
| text that is not known | empty | empty | empty field |
| whole numbers | always there | always there | always there |
| decimals | full double | full double | as given below |

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
