package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"duskline/pipeline"
)

// templatesCmd groups the commands about template families.
type templatesCmd struct {
	List  templatesListCmd  `cmd:"" help:"List the families that a run tries."`
	Show  templatesShowCmd  `cmd:"" help:"Show what a family is made of."`
	Check templatesCheckCmd `cmd:"" help:"Check recipe files of your own."`
	Stack templatesStackCmd `cmd:"" help:"Make a rest-frame composite of a run's secure objects, for use in a recipe."`
}

type templatesListCmd struct {
	Recipes string `placeholder:"DIR" help:"Folder of recipes over the built-in ones."`
}

// Help teaches by example.
func (templatesListCmd) Help() string {
	return `Examples:
  duskline templates list                    what is built in
  duskline templates list --recipes ours/    with your recipes over it, as in duskline run --recipes ours/

The digest of every family tried stands in the catalog of a run.`
}

func (c *templatesListCmd) run(a *app) (int, error) {
	all, err := readTemplates(a, c.Recipes)
	if err != nil {
		return 0, err
	}
	writeTable(a.stdout, func(t io.Writer) {
		fmt.Fprintf(t, "family\tclass\tredshift\twidths km/s\tcomponents\tdigest\tfrom\n")
		for _, f := range all {
			var names []string
			for _, v := range f.View(f.Widths[0]) {
				names = append(names, v.Name)
			}
			from := f.File
			if f.BuiltIn {
				from = "built-in"
			}
			fmt.Fprintf(t, "%s\t%s\t%g to %g\t%s\t%d\t%s\t%s\n", f.Name, f.Class, f.ZMin, f.ZMax, joined(f.Widths), len(names), f.Digest, from)
		}
	})
	return exitDone, nil
}

func joined(values []float64) string {
	parts := make([]string, len(values))
	for i, v := range values {
		parts[i] = fmt.Sprintf("%g", v)
	}
	return strings.Join(parts, ", ")
}

// readTemplates compiles the built-in families with a folder of recipes over
// them.
func readTemplates(a *app, folder string) ([]pipeline.Template, error) {
	recipes, err := readRecipes(a, folder)
	if err != nil {
		return nil, err
	}
	return pipeline.Templates(recipes)
}

type templatesShowCmd struct {
	Recipes string   `placeholder:"DIR" help:"Folder of recipes over the built-in ones."`
	Z       *float64 `placeholder:"Z" help:"Redshift of the forest of Lyman-alpha and of the observed wavelengths; by default in the middle of the family's range."`
	Plot    string   `placeholder:"OUT.png" help:"Also draw each component and an example of their sum."`
	Name    string   `arg:"" help:"Family, as in templates list."`
}

// Help teaches by example.
func (templatesShowCmd) Help() string {
	return `Examples:
  duskline templates show quasar                           components, lines, ratios, sources
  duskline templates show quasar --z 2.5 --plot quasar.png each component drawn, in rest wavelength
  duskline templates show ours --recipes ours/             a family of your own`
}

func (c *templatesShowCmd) run(a *app) (int, error) {
	if c.Plot != "" && !strings.EqualFold(filepath.Ext(c.Plot), ".png") {
		return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("the picture %s would be no PNG by its name; give a name that ends in .png", c.Plot)}}
	}
	all, err := readTemplates(a, c.Recipes)
	if err != nil {
		return 0, err
	}
	var names []string
	for i := range all {
		if names = append(names, all[i].Name); all[i].Name != c.Name {
			continue
		}
		z := middle(all[i].ZMin, all[i].ZMax)
		if c.Z != nil {
			if z = *c.Z; !(z >= all[i].ZMin && z <= all[i].ZMax) {
				return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("--z %g is outside the range of family %s, %g to %g", z, c.Name, all[i].ZMin, all[i].ZMax)}}
			}
		}
		writeTemplate(a.stdout, &all[i])
		if c.Plot == "" {
			return exitDone, nil
		}
		if err := saveTemplate(a.locate(c.Plot), &all[i], z); err != nil {
			return 0, err
		}
		fmt.Fprintf(a.stdout, "\nThe picture is in %s.\n", c.Plot)
		return exitDone, nil
	}
	return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("there is no family %q; the families are %s", c.Name, strings.Join(names, ", "))}}
}

// middle is a round redshift half-way through a range; 0 where that is in it
// and the range is that of things near by.
func middle(first, last float64) float64 {
	if first <= 0 && last >= 0 && last < 0.1 {
		return 0
	}
	m := 0.5 * (first + last)
	if rounded := float64(int(10*m)) / 10; rounded > first && rounded < last {
		return rounded
	}
	return m
}

// writeTemplate prints what a family is made of.
func writeTemplate(w io.Writer, f *pipeline.Template) {
	from := f.File
	if f.BuiltIn {
		from = "built-in, " + f.File
	}
	fmt.Fprintf(w, "%s (%s): %s\nWavelengths are at rest in vacuum, Angstrom; a shift is that of the line against the redshift of the object.\n\n", f.Name, f.Class, f.Summary)
	writeTable(w, func(t io.Writer) {
		fmt.Fprintf(t, "redshift\t%g to %g\n", f.ZMin, f.ZMax)
		fmt.Fprintf(t, "widths\t%s km/s, Gaussian sigma; a component may have its own\n", joined(f.Widths))
		fmt.Fprintf(t, "floor\t%g km/s, least error of a redshift\n", f.Floor())
		for _, g := range f.Scatters() {
			fmt.Fprintf(t, "scatter\t%g km/s of %s against the redshift; source: %s\n", g.Kms, strings.Join(g.Lines, ", "), g.Source)
		}
		fmt.Fprintf(t, "expected\t%s\n", orNot(strings.Join(f.Expected(), ", "), "no lines"))
		if needs := f.Needs(); len(needs) > 0 {
			fmt.Fprintf(t, "needs\t%s\n", strings.Join(needs, " or "))
		}
		fmt.Fprintf(t, "digest\t%s\n", f.Digest)
		fmt.Fprintf(t, "from\t%s\n", from)
	})
	for _, v := range f.View(f.Widths[0]) {
		kind := "emission"
		if v.Absorption {
			kind = "absorption"
		}
		bound := ""
		if v.Most > 0 {
			bound = fmt.Sprintf(", at most %g of the continuum", v.Most)
		}
		if v.Least > 0 {
			bound += fmt.Sprintf(", there from %g on", v.Least)
		}
		fmt.Fprintf(w, "\n%s: %s%s\n  source: %s\n", v.Name, kind, bound, orNot(v.Source, "none"))
		writeTable(w, func(t io.Writer) {
			for _, s := range v.Shapes {
				switch s.Kind {
				case "line", "bump":
					shift := ""
					if s.Shift != 0 {
						shift = fmt.Sprintf("\tshift %+.0f km/s", s.Shift)
					}
					fmt.Fprintf(t, "  %s\t%.2f A\tratio %.4g\tsigma %.5g km/s%s\n", orNot(s.Name, s.Kind), s.Rest, s.Ratio, s.Width, shift)
				case "stark", "jump":
					what := "lines"
					if s.Kind == "jump" {
						what = "confluence of lines"
					}
					fmt.Fprintf(t, "  Balmer %s up to 2-%d\tat %g electrons a cm^3, %g K\tstrength %g\tsigma %g km/s\n", what, s.Upper, s.Density, s.Temperature, s.Strength, s.Width)
				case "edge":
					fmt.Fprintf(t, "  edge\t%.2f A\tdepth %.4g\twidth %g A\n", s.Wave, s.Ratio, s.Width)
				case "head":
					fmt.Fprintf(t, "  band head\t%.2f A\tdepth %.4g\ttail %g A\n", s.Wave, s.Ratio, s.Width)
				case "stack":
					fmt.Fprintf(t, "  composite\t%.2f A\tto %.2f A\tdigest %s\n", s.Wave, s.Last, s.Name)
				case "forest":
					fmt.Fprintf(t, "  forest\tmean transmission of the intergalactic medium%s\n", moved(f.Proximity()))
				}
			}
		})
	}
}

// moved says by how much a quasar moves the edges of the forest.
func moved(kms float64) string {
	if kms == 0 {
		return ""
	}
	return fmt.Sprintf(", its edges %.0f km/s blueward", kms)
}

type templatesCheckCmd struct {
	Path []string `arg:"" help:"Recipe files in TOML, or folders of them (*.toml)."`
}

// Help teaches by example.
func (templatesCheckCmd) Help() string {
	return `Examples:
  duskline templates check ours/                a folder of recipes, as for duskline run --recipes ours/
  duskline templates check ours/lensed.toml     one of them

Recipes are checked together, as a run would read them. Every problem is reported with file, component and key; the exit code is then 2.`
}

func (c *templatesCheckCmd) run(a *app) (int, error) {
	files, problems := c.files(a)
	failed := map[string]bool{}
	var recipes []pipeline.RecipeText
	for _, name := range files {
		r, err := pipeline.ReadRecipe(a.locate(name), name)
		if err != nil {
			problems, failed[name] = append(problems, err.Error()), true
			continue
		}
		recipes = append(recipes, r)
	}
	all, err := pipeline.Templates(recipes)
	if err != nil {
		for _, line := range strings.Split(err.Error(), "\n") {
			problems = append(problems, line)
			for _, r := range recipes {
				failed[r.Name] = failed[r.Name] || strings.HasPrefix(line, r.Name+": ")
			}
		}
		recipes = slices.DeleteFunc(recipes, func(r pipeline.RecipeText) bool { return failed[r.Name] })
		if all, err = pipeline.Templates(recipes); err != nil {
			recipes = nil // which of them is wrong cannot be told
		}
	}
	for _, r := range recipes {
		says := "switches a built-in family off"
		for i := range all {
			if f := &all[i]; !f.BuiltIn && f.File == r.Name {
				says = fmt.Sprintf("family %s, class %s, %s, digest %s", f.Name, f.Class,
					count(int64(len(f.View(f.Widths[0]))), "component", "components"), f.Digest)
			}
		}
		fmt.Fprintf(a.stdout, "%s: in order; %s\n", r.Name, says)
	}
	if len(problems) > 0 {
		return 0, &pipeline.InputError{Problems: append(problems, fmt.Sprintf("%d of %s in order", len(recipes), count(int64(len(files)), "recipe", "recipes")))}
	}
	fmt.Fprintf(a.stdout, "\n%s in order.\n", count(int64(len(files)), "recipe is", "recipes are"))
	return exitDone, nil
}

// files names the recipes to check, those of folders in order of their names, each once.
func (c *templatesCheckCmd) files(a *app) (files, problems []string) {
	for _, path := range c.Path {
		names := []string{path}
		if info, err := os.Stat(a.locate(path)); err == nil && info.IsDir() {
			within, err := pipeline.RecipeFiles(a.locate(path), path)
			if err != nil {
				problems = append(problems, err.Error())
			}
			names = names[:0]
			for _, name := range within {
				names = append(names, filepath.Join(path, name))
			}
		}
		for _, name := range names {
			if !slices.Contains(files, name) {
				files = append(files, name)
			}
		}
	}
	return files, problems
}
