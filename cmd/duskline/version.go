package main

import (
	"encoding/json"
	"fmt"
	"maps"
	"runtime"
	"runtime/debug"
	"slices"
	"strings"

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
		return exitDone, enc.Encode(map[string]any{"program": "duskline", "version": version(), "go": runtime.Version(), "digests": digests})
	}
	fmt.Fprintf(a.stdout, "duskline %s, built with %s\n", version(), runtime.Version())
	for _, name := range slices.Sorted(maps.Keys(digests)) {
		fmt.Fprintf(a.stdout, "%-10s %s\n", strings.ReplaceAll(name, "_", " "), digests[name])
	}
	return exitDone, nil
}
