package catalog

import (
	"fmt"
	"strings"
	"testing"
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
| another answer is nearly as good | ` + "`low_confidence`, or `tied` where the scores are close" + ` |
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
		fmt.Fprintf(&b, "| %d | %d | `%s` | %s |\n", bit, 1<<bit, f.name, flagMeanings[f.name])
	}
	b.WriteString("\n## Flags of absorbers\n\nBits of `flags` in the absorber table.\n\n| bit | value | name | says |\n|---|---|---|---|\n")
	for bit, f := range absorberFlagTable {
		fmt.Fprintf(&b, "| %d | %d | `%s` | %s |\n", bit, 1<<bit, f.name, f.says)
	}
	return b.String()
}

// flagMeanings say what a flag means for who uses the catalog.
var flagMeanings = map[string]string{
	"unreadable":      "the file or this spectrum in it could not be read; `reason` says what to do",
	"few_pixels":      "too few usable pixels; `reason` says what took the others",
	"faint":           "neither continuum nor lines stand above the noise",
	"tied":            "another redshift fits nearly as well, or explains nearly as much: see `rival_redshift` and `gap`; never secure",
	"range_end":       "the best redshift lies at the end of the family's range",
	"lone_line":       "a single feature stands out by itself; secure only where many weak ones in absorption make up for it",
	"misfit":          "the best model leaves the spectrum badly described",
	"lines_unseen":    "more than half of the lines that should be strong are outside the coverage or masked",
	"lines_missing":   "lines that the model predicts strongly, the weaker ones together, or the Lyman-alpha forest are covered and not there",
	"below_zero":      "the continuum is negative over a good part",
	"scattered":       "the lines disagree on the velocity",
	"on_sky_line":     "without lines on night-sky lines or in bands of the air fewer than two support the redshift; emission on a night-sky line alone never makes it secure",
	"frame_assumed":   "air or vacuum, or the velocity frame, was not stated and was assumed",
	"noise_estimated": "no errors in the input: noise was estimated from the flux",
	"weights_suspect": "the stated errors disagree with the scatter",
	"normalized":      "the input looks divided by its continuum; no galaxy or quasar is secure then",
	"outside_limits":  "outside the limits or the class that the manifest gives something fits better; secure only where that has the same redshift",
	"unexplained":     "narrow emission that no line at the redshift explains: a second object in the aperture? `reason` gives the wavelengths; each takes one from the features that `secure` needs",
	"few_lines":       "fewer lines stand out by themselves than `secure` needs (two, or one with a very clear lead), or of a family that lives on emission none in emission, or of a star none but those of our own Galaxy's gas; the redshift then rests on the shape of the whole",
	"low_confidence":  "`confidence` is below what `secure` needs (0.995): the lead over the rival, or over no template at all, is small for a fit this good",
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

func TestEveryFlagIsExplained(t *testing.T) {
	for _, name := range FlagNames() {
		if flagMeanings[name] == "" {
			t.Errorf("docs/columns.md would not say what the flag %s means", name)
		}
	}
	if len(flagMeanings) != len(flagTable) {
		t.Errorf("%d flags are explained, there are %d", len(flagMeanings), len(flagTable))
	}
}
