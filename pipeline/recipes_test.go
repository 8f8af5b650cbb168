package pipeline

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

const lampRecipe = `
name = "lamp"
class = "galaxy"
redshift = [0.0, 0.4]
widths = [100.0]
[[component]]
name = "glow"
kind = "emission"
source = "invented"
lines = [{ line = "Ha", ratio = 1.0 }]
`

func recipe(file, text string) RecipeText { return RecipeText{Name: file, Text: text} }

func familyNames(all []Template) []string {
	var names []string
	for _, t := range all {
		names = append(names, t.Name)
	}
	return names
}

func TestTemplates(t *testing.T) {
	plain, err := Templates(nil)
	if err != nil {
		t.Fatal(err)
	}
	builtIn := familyNames(plain)
	if !slices.Contains(builtIn, "passive") || !slices.Contains(builtIn, "quasar") {
		t.Fatalf("built in are %v", builtIn)
	}
	all, err := Templates([]RecipeText{
		recipe("z.toml", lampRecipe),
		recipe("mine.toml", strings.Replace(lampRecipe, `"lamp"`, `"passive"`, 1)),
		recipe("no.toml", "name = \"carbon\"\noff = true\nsummary = \"none here\"\n"),
	})
	if err != nil {
		t.Fatal(err)
	}
	// The order of the built-in ones, what is off left out, what is new at the end.
	want := append(slices.DeleteFunc(slices.Clone(builtIn), func(n string) bool { return n == "carbon" }), "lamp")
	if got := familyNames(all); !slices.Equal(got, want) {
		t.Errorf("families %v, want %v", got, want)
	}
	for _, f := range all {
		if mine := f.Name == "passive" || f.Name == "lamp"; mine == f.BuiltIn {
			t.Errorf("%s: built-in is %v", f.Name, f.BuiltIn)
		}
	}
	// The digests of a chain are those of the families that it tries.
	chain, err := NewChain(DefaultSettings(), recipe("mine.toml", strings.Replace(lampRecipe, `"lamp"`, `"passive"`, 1)))
	if err != nil {
		t.Fatal(err)
	}
	i := slices.Index(familyNames(all), "passive")
	if got := chain.Digests()["family passive"]; got != all[i].Digest || got == plain[slices.Index(builtIn, "passive")].Digest {
		t.Errorf("digest %s of a family that took the place of another", got)
	}
}

func TestTemplatesRefuse(t *testing.T) {
	off := func(name string) RecipeText { return recipe("off-"+name+".toml", "off = true\nname = \""+name+"\"\n") }
	plain, err := Templates(nil)
	if err != nil {
		t.Fatal(err)
	}
	var everything []RecipeText
	for _, f := range plain {
		everything = append(everything, off(f.Name))
	}
	for _, c := range []struct {
		name    string
		recipes []RecipeText
		want    []string // one problem each
	}{
		{"three files, three problems", []RecipeText{
			recipe("a.toml", strings.Replace(lampRecipe, `"Ha"`, `"Hz"`, 1)),
			recipe("b.toml", strings.Replace(lampRecipe, "0.4", "-0.4", 1)),
			recipe("c.toml", strings.Replace(lampRecipe, `"emission"`, `"absorption"`, 1)+"stack = \"gone.fits\"\n"),
		}, []string{`a.toml: component "glow": lines: no line "Hz"`, "b.toml: redshift = [0 -0.4]", `c.toml: component "glow": stack = "gone.fits"`}},
		{"twice", []RecipeText{recipe("a.toml", lampRecipe), recipe("b.toml", lampRecipe)}, []string{`b.toml: name = "lamp" is the name in a.toml too`}},
		{"off and on", []RecipeText{off("passive"), recipe("b.toml", strings.Replace(lampRecipe, "lamp", "passive", 1))}, []string{`b.toml: name = "passive" is the name in off-passive.toml too`}},
		{"off is nobody", []RecipeText{off("pasive")}, []string{`off-pasive.toml: off: no built-in family is called "pasive"`}},
		{"off with more", []RecipeText{recipe("a.toml", "off = true\n"+lampRecipe)}, []string{"a.toml: off = true goes with name and summary only"}},
		{"off without name", []RecipeText{recipe("a.toml", "off = true\n")}, []string{"a.toml: name is missing"}},
		{"a name for no catalog", []RecipeText{recipe("a.toml", strings.Replace(lampRecipe, "lamp", "my lamp", 1))}, []string{`a.toml: name = "my lamp", want letters`}},
		{"nothing left", everything, []string{"every family is switched off"}},
	} {
		_, err := Templates(c.recipes)
		var input *InputError
		if !errors.As(err, &input) {
			t.Errorf("%s: error %v", c.name, err)
			continue
		}
		if len(input.Problems) != len(c.want) {
			t.Errorf("%s: %d problems, want %d:\n%v", c.name, len(input.Problems), len(c.want), err)
			continue
		}
		for i, want := range c.want {
			if !strings.HasPrefix(input.Problems[i], want) {
				t.Errorf("%s: problem %q, want one that begins with %q", c.name, input.Problems[i], want)
			}
		}
	}
}

func TestReadRecipes(t *testing.T) {
	dir := t.TempDir()
	var input *InputError
	if _, err := ReadRecipes(dir, "ours"); !errors.As(err, &input) || !strings.Contains(err.Error(), "ours holds no recipe") {
		t.Errorf("an empty folder: %v", err)
	}
	if _, err := ReadRecipes(filepath.Join(dir, "gone"), "gone"); !errors.As(err, &input) || !strings.Contains(err.Error(), "gone") {
		t.Errorf("no folder: %v", err)
	}
	dense := strings.Replace(lampRecipe, `"emission"`, `"absorption"`, 1)
	for name, text := range map[string]string{"b.toml": lampRecipe, "a.TOML": dense + "stack = \"sub/dense.fits\"\n", "readme.txt": "x", ".c.toml": "x"} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	// The path of a stack starts from its recipe.
	writeSpectrumFile(t, filepath.Join(dir, "sub", "dense.fits"), ridge, 0.01, 1)
	got, err := ReadRecipes(dir, "ours")
	if err != nil {
		t.Fatal(err)
	}
	if len(got) != 2 || got[0].Name != filepath.Join("ours", "a.TOML") || got[1].Name != filepath.Join("ours", "b.toml") || len(got[0].Stacks) != 1 {
		t.Fatalf("read %d recipes: %+v", len(got), got)
	}
	s := got[0].Stacks[0]
	if s.problem != "" || len(s.Digest) != 16 || len(s.Flux) != 4*3400 {
		t.Errorf("the stack has digest %q, %d bytes, problem %q", s.Digest, len(s.Flux), s.problem)
	}
	if _, err := s.composite(); err != nil {
		t.Errorf("no composite comes of it: %v", err)
	}
}
