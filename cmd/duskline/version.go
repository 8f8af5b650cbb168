package main

import (
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io"
	"maps"
	"os"
	"runtime"
	"runtime/debug"
	"slices"
	"strings"

	"duskline/catalog"
	"duskline/pipeline"
)

// release is the version of the program. It changes with every release that
// can change a result.
const release = "0.1.0"

// version returns the release and, if known, the revision it was built from.
func version() string {
	if revision := revision(); revision != "" {
		return release + "+" + revision
	}
	return release
}

// revision returns the first 12 digits of the revision that the binary was
// built from, with "-changed" if files were changed since; empty if unknown.
func revision() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return ""
	}
	var rev, changed string
	for _, s := range info.Settings {
		switch {
		case s.Key == "vcs.revision":
			rev = s.Value[:min(12, len(s.Value))]
		case s.Key == "vcs.modified" && s.Value == "true":
			changed = "-changed"
		}
	}
	if rev == "" {
		return ""
	}
	return rev + changed
}

// build names the binary: what it was built with and for, and the digest of
// its bytes. Two builds of one version may differ in the last digits of a
// result. It is empty where the binary cannot be read.
func build() string {
	path, err := os.Executable()
	if err != nil {
		return ""
	}
	f, err := os.Open(path)
	if err != nil {
		return ""
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return ""
	}
	return fmt.Sprintf("%s %s/%s %x", runtime.Version(), runtime.GOOS, runtime.GOARCH, sum.Sum(nil)[:8])
}

type versionCmd struct {
	JSON bool `name:"json" help:"Print JSON."`
}

// Help teaches by example.
func (versionCmd) Help() string {
	return `The digests name the template recipes, the line list and the default settings that are built in. The same digests stand in every catalog.`
}

func (c *versionCmd) run(a *app) (int, error) {
	set := pipeline.DefaultSettings()
	chain, err := pipeline.NewChain(set)
	if err != nil {
		return 0, err
	}
	digests := chain.Digests()
	digests["settings"] = set.Digest()
	if c.JSON {
		enc := json.NewEncoder(a.stdout)
		enc.SetIndent("", "  ")
		return exitDone, enc.Encode(map[string]any{"program": "duskline", "version": version(), "release": release, "revision": revision(), "build": build(),
			"go": runtime.Version(), "system": runtime.GOOS + "/" + runtime.GOARCH, "catalog_format": catalog.FormatVersion, "digests": digests})
	}
	fmt.Fprintf(a.stdout, "duskline %s, build %s\n", version(), build())
	for _, name := range slices.Sorted(maps.Keys(digests)) {
		fmt.Fprintf(a.stdout, "%-10s %s\n", strings.ReplaceAll(name, "_", " "), digests[name])
	}
	return exitDone, nil
}
