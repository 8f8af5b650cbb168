package duskline_test

import (
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// module is the path of this module in import declarations.
const module = "duskline"

// edges says which of our own packages each package may import. Test files may
// also import what makes their inputs, see testEdges. Anything else fails:
// reading knows nothing of statistics, statistics knows nothing of files.
var edges = map[string][]string{
	"spectrum":             {},
	"hydrogen":             {},
	"configs":              {},
	"cluster":              {"internal/shards"},
	"manifest":             {"internal/spill"},
	"internal/checkvalues": {},
	"internal/fitsout":     {},
	"internal/outside":     {},
	"internal/shards":      {},
	"internal/spill":       {},
	"linelist":             {"hydrogen"},
	"fitsread":             {"spectrum"},
	"continuum":            {"spectrum"},
	"redshift":             {"spectrum", "hydrogen", "linelist", "continuum"},
	"lines":                {"spectrum", "hydrogen", "linelist"},
	"absorbers":            {"spectrum", "hydrogen", "linelist"},
	"catalog":              {"internal/fitsout", "internal/spill"},
	"synth":                {"spectrum", "hydrogen", "linelist", "catalog", "internal/fitsout"},
	"pipeline": {"spectrum", "hydrogen", "linelist", "configs", "fitsread", "continuum", "redshift", "lines", "absorbers",
		"catalog", "synth", "internal/fitsout", "internal/shards", "internal/spill", "manifest"},
	"cmd/duskline": {"pipeline", "cluster", "internal/shards", "catalog", "synth", "configs", "fitsread", "spectrum"},
}

// testEdges is what the tests of any package may import on top: makers of
// inputs, what reads published values, finds programs and data outside, and the embedded configuration. None of these may import it back.
var testEdges = []string{"configs", "internal/checkvalues", "internal/fitsout", "internal/outside", "synth", "linelist", "hydrogen", "spectrum"}

func TestImportDirections(t *testing.T) {
	seen := map[string]bool{}
	eachGoFile(t, func(file, room string) {
		allowed, ok := edges[room]
		if !ok && room != "." {
			t.Errorf("%s: package folder %s is not in the table of this test", file, room)
			return
		}
		seen[room] = true
		isTest := strings.HasSuffix(file, "_test.go")
		for _, imported := range importsOf(t, file) {
			ours, ok := strings.CutPrefix(imported, module+"/")
			if !ok || ours == room || slices.Contains(allowed, ours) || isTest && slices.Contains(testEdges, ours) {
				continue
			}
			t.Errorf("%s: package %s must not import %s", file, room, ours)
		}
	})
	for _, room := range []string{"spectrum", "pipeline", "cmd/duskline"} {
		if !seen[room] {
			t.Errorf("no Go file of %s was looked at: the test is blind", room)
		}
	}
}

// TestEdgesHaveNoCycle guards the table itself.
func TestEdgesHaveNoCycle(t *testing.T) {
	const (
		open = 1
		done = 2
	)
	state := map[string]int{}
	var visit func(room string, way []string)
	visit = func(room string, way []string) {
		switch state[room] {
		case open:
			t.Fatalf("cycle: %s", strings.Join(append(way, room), " -> "))
		case done:
			return
		}
		state[room] = open
		for _, next := range edges[room] {
			if _, ok := edges[next]; !ok {
				t.Errorf("%s may import %s, which is not in the table", room, next)
			}
			visit(next, append(way, room))
		}
		state[room] = done
	}
	for room := range edges {
		visit(room, nil)
	}
}

// outside are the names that only cmd may use: arguments, environment, standard
// streams, clock and exit.
var outside = map[string]string{
	"os":   "Args Exit Getenv LookupEnv Environ Stdin Stdout Stderr Getwd",
	"time": "Now Since Until",
	"fmt":  "Print Printf Println Scan Scanf Scanln",
	"log":  "Print Printf Println Fatal Fatalf Fatalln Panic Panicf Panicln",
}

// TestOutsideStaysOutside keeps kernels pure and serial: what they need comes
// as an argument, what is wrong goes back as an error, and goroutines have one
// owner.
func TestOutsideStaysOutside(t *testing.T) {
	eachGoFile(t, func(file, room string) {
		if strings.HasPrefix(room, "cmd/") || room == "internal/outside" || strings.HasSuffix(file, "_test.go") {
			return
		}
		files := token.NewFileSet()
		f, err := parser.ParseFile(files, file, nil, parser.SkipObjectResolution)
		if err != nil {
			t.Fatal(err)
		}
		ast.Inspect(f, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.SelectorExpr:
				if pkg, ok := n.X.(*ast.Ident); ok && slices.Contains(strings.Fields(outside[pkg.Name]), n.Sel.Name) {
					t.Errorf("%s: %s.%s belongs to cmd", files.Position(n.Pos()), pkg.Name, n.Sel.Name)
				}
			case *ast.GoStmt:
				if room != "pipeline" {
					t.Errorf("%s: only pipeline starts goroutines", files.Position(n.Pos()))
				}
			case *ast.ImportSpec:
				if strings.Contains(n.Path.Value, "errgroup") && room != "pipeline" {
					t.Errorf("%s: only pipeline starts goroutines", files.Position(n.Pos()))
				}
			}
			return true
		})
	})
}

// TestOneRuleForSkips: what is missing outside is told in one place, which knows
// when a skip is a failure.
func TestOneRuleForSkips(t *testing.T) {
	eachGoFile(t, func(file, room string) {
		if room == "." || room == "internal/outside" {
			return
		}
		text, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range []string{"DUSKLINE_NO_SKIP", "DUSKLINE_SHARED", "/usr/bin/python3"} {
			if strings.Contains(string(text), name) {
				t.Errorf("%s: %s belongs to internal/outside", file, name)
			}
		}
	})
}

// eachGoFile calls visit for every Go file with its path and its folder.
func eachGoFile(t *testing.T, visit func(file, room string)) {
	t.Helper()
	err := filepath.WalkDir(".", func(file string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && (d.Name() == "testdata" || len(d.Name()) > 1 && strings.HasPrefix(d.Name(), ".")) {
			return filepath.SkipDir
		}
		if !d.IsDir() && strings.HasSuffix(file, ".go") {
			file = filepath.ToSlash(file)
			visit(file, path.Dir(file))
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

func importsOf(t *testing.T, file string) []string {
	t.Helper()
	f, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	for _, spec := range f.Imports {
		name, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, name)
	}
	return out
}
