package pipeline

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"duskline/configs"
	"duskline/fitsread"
	"duskline/linelist"
	"duskline/redshift"
	"duskline/spectrum"

	"github.com/pelletier/go-toml/v2"
)

// RecipeText is one recipe of a user: a family that is added to the built-in
// ones, takes the place of the one of its name, or switches that one off. It
// holds all that the recipe depends on, so that a plan can keep it.
type RecipeText struct {
	Name   string      `json:"name"` // of the file, for messages
	Text   string      `json:"text"`
	Stacks []StackText `json:"stacks,omitempty"`
}

// StackText is a dense spectrum that a recipe names.
type StackText struct {
	Path   string  `json:"path"` // as the recipe has it
	Digest string  `json:"digest"`
	Start  float64 `json:"start"` // log10 of the first wavelength, Angstrom
	// Flux has a little-endian float32 for each pixel of
	// redshift.CompositeStep, NaN for no data.
	Flux []byte `json:"flux"`

	problem string // why it cannot be read
}

// Template is a family that a run tries, and where it comes from.
type Template struct {
	*redshift.Family
	File    string // name of the recipe's file
	BuiltIn bool
}

// ReadRecipes reads the recipes (*.toml) of a folder in order of their names,
// with the spectra they name; name is how people call the folder. The error is
// an *InputError. What is wrong inside a recipe is found by Templates.
func ReadRecipes(folder, name string) ([]RecipeText, error) {
	files, err := RecipeFiles(folder, name)
	if err != nil {
		return nil, err
	}
	var out []RecipeText
	var problems []string
	for _, file := range files {
		r, err := ReadRecipe(filepath.Join(folder, file), filepath.Join(name, file))
		if err != nil {
			problems = append(problems, err.Error())
			continue
		}
		out = append(out, r)
	}
	if len(problems) > 0 {
		return nil, &InputError{problems}
	}
	return out, nil
}

// RecipeFiles names the recipes (*.toml) of a folder, at least one, in order; name is how
// people call the folder. The error is an *InputError.
func RecipeFiles(folder, name string) ([]string, error) {
	entries, err := os.ReadDir(folder)
	if err != nil {
		return nil, inputError("the folder of recipes %s cannot be read: %s", name, plain(err))
	}
	var files []string
	for _, e := range entries {
		if strings.EqualFold(filepath.Ext(e.Name()), ".toml") && !strings.HasPrefix(e.Name(), ".") {
			files = append(files, e.Name())
		}
	}
	if len(files) == 0 {
		return nil, inputError("%s holds no recipe (*.toml); give the folder of your recipes", name)
	}
	return files, nil
}

// ReadRecipe reads one recipe with the spectra it names. The error is an
// *InputError.
func ReadRecipe(path, name string) (RecipeText, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return RecipeText{}, inputError("the recipe %s cannot be read: %s", name, plain(err))
	}
	r := RecipeText{Name: name, Text: string(text)}
	var named struct {
		Component []struct {
			Stack string `toml:"stack"`
		} `toml:"component"`
	}
	if toml.Unmarshal(text, &named) != nil {
		return r, nil // Templates says what is wrong with it
	}
	for _, c := range named.Component {
		known := slices.ContainsFunc(r.Stacks, func(s StackText) bool { return s.Path == c.Stack })
		if c.Stack != "" && !known {
			r.Stacks = append(r.Stacks, readStack(locate(filepath.Dir(path), c.Stack), c.Stack))
		}
	}
	return r, nil
}

// readStack reads a rest-frame spectrum onto the grid of composites. Its
// wavelengths are taken as they stand, in vacuum and at rest.
func readStack(path, name string) StackText {
	s := StackText{Path: name}
	f, err := fitsread.Open(path, fitsread.Options{})
	if err != nil {
		s.problem = plainRead(err)
		return s
	}
	defer f.Close()
	if f.Count() != 1 {
		s.problem = fmt.Sprintf("holds %d spectra, want one", f.Count())
		return s
	}
	sp, err := f.Read(0)
	if err != nil {
		s.problem = plainRead(err)
		return s
	}
	s.Digest = sp.InputDigest
	first, last := redshift.CompositeRange()
	gridder := spectrum.Gridder{Step: redshift.CompositeStep, MinWave: first, MaxWave: last}
	var g spectrum.Grid
	gridder.Grid(&g, sp)
	s.Start = g.Start
	for i, v := range g.Flux {
		if !(g.Ivar[i] > 0) {
			v = math.NaN()
		}
		s.Flux = binary.LittleEndian.AppendUint32(s.Flux, math.Float32bits(float32(v)))
	}
	return s
}

// plainRead leaves out the path, which the recipe names itself.
func plainRead(err error) string {
	var re *fitsread.ReadError
	if errors.As(err, &re) {
		named := *re
		named.File = "the file"
		return strings.TrimPrefix(named.Error(), "the file: ") // the caller names it
	}
	return plain(err)
}

// composite makes the dense component of a stack.
func (s *StackText) composite() (*redshift.Composite, error) {
	if s.problem != "" {
		return nil, errors.New(s.problem)
	}
	n := len(s.Flux) / 4
	g := spectrum.Grid{Start: s.Start, Step: redshift.CompositeStep, Flux: make([]float64, n), Ivar: make([]float64, n)}
	for i := range g.Flux {
		v := float64(math.Float32frombits(binary.LittleEndian.Uint32(s.Flux[4*i:])))
		if !math.IsNaN(v) {
			g.Flux[i], g.Ivar[i] = v, 1
		}
	}
	return redshift.NewComposite(&g, s.Digest)
}

// familyName is what a family of a user may be called: it stands in catalogs and
// on command lines.
var familyName = regexp.MustCompile(`^[A-Za-z][A-Za-z0-9_-]{0,39}$`)

// Templates compiles the built-in families with the recipes of a user over
// them. A recipe of a new name adds a family; one of the name of a built-in
// family takes its place; one that says off = true beside the name of a
// built-in family switches that off. The error is an *InputError with every
// problem of every recipe, each with file, component and key.
func Templates(recipes []RecipeText) ([]Template, error) {
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		return nil, err
	}
	return templates(list, recipes)
}

func templates(list *linelist.List, recipes []RecipeText) ([]Template, error) {
	all, err := builtIn(list)
	if err != nil {
		return nil, err
	}
	var problems []string
	from := map[string]string{} // family to the file that speaks of it
	var added []Template
	for i := range recipes {
		t, off, err := recipes[i].compile(list)
		if err != nil {
			problems = append(problems, strings.Split(err.Error(), "\n")...)
			continue
		}
		name := off
		if t != nil {
			name = t.Family.Name
		}
		if other := from[name]; other != "" {
			problems = append(problems, fmt.Sprintf("%s: name = %q is the name in %s too", recipes[i].Name, name, other))
			continue
		}
		from[name] = recipes[i].Name
		k := slices.IndexFunc(all, func(o Template) bool { return o.Family.Name == name })
		switch {
		case off != "" && k < 0:
			problems = append(problems, fmt.Sprintf("%s: off: no built-in family is called %q", recipes[i].Name, off))
		case off != "":
			all = slices.Delete(all, k, k+1)
		case k >= 0:
			all[k] = *t
		default:
			added = append(added, *t)
		}
	}
	slices.SortFunc(added, func(a, b Template) int { return strings.Compare(a.Family.Name, b.Family.Name) })
	all = append(all, added...)
	if len(all) == 0 && len(problems) == 0 {
		problems = append(problems, "every family is switched off: nothing is left to try")
	}
	if len(problems) > 0 {
		return nil, &InputError{problems}
	}
	return all, nil
}

// builtIn compiles the recipes that come with the program, in order of names.
func builtIn(list *linelist.List) ([]Template, error) {
	folder := configs.Families()
	names, err := fs.Glob(folder, "*.toml")
	if err != nil {
		return nil, err
	}
	var out []Template
	for _, name := range names {
		text, err := fs.ReadFile(folder, name)
		if err != nil {
			return nil, fmt.Errorf("template family: %w", err)
		}
		f, err := redshift.ParseRecipe(name, text, list)
		if err != nil {
			return nil, fmt.Errorf("template family: %w", err)
		}
		out = append(out, Template{f, name, true})
	}
	return out, nil
}

// compile returns the family of a recipe or the name of the family that it
// switches off.
func (r *RecipeText) compile(list *linelist.List) (t *Template, off string, err error) {
	var says struct {
		Name    string `toml:"name"`
		Summary string `toml:"summary"`
		Off     bool   `toml:"off"`
	}
	if toml.Unmarshal([]byte(r.Text), &says) == nil && says.Off {
		dec := toml.NewDecoder(bytes.NewReader([]byte(r.Text))).DisallowUnknownFields()
		if dec.Decode(&says) != nil {
			return nil, "", fmt.Errorf("%s: off = true goes with name and summary only: remove the other keys, or off", r.Name)
		}
		if says.Name == "" {
			return nil, "", fmt.Errorf("%s: name is missing: say which family is off", r.Name)
		}
		return nil, says.Name, nil
	}
	f, err := redshift.ParseRecipeWith(r.Name, []byte(r.Text), list, r.stack)
	if says.Name != "" && !familyName.MatchString(says.Name) {
		err = errors.Join(fmt.Errorf("%s: name = %q, want letters, digits, _ and -, beginning with a letter, at most 40", r.Name, says.Name), err)
	}
	if err != nil {
		return nil, "", err
	}
	return &Template{f, r.Name, false}, "", nil
}

func (r *RecipeText) stack(path string) (*redshift.Composite, error) {
	for i := range r.Stacks {
		if r.Stacks[i].Path == path {
			return r.Stacks[i].composite()
		}
	}
	return nil, errors.New("the spectrum was not read with the recipe")
}
