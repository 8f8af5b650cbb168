// Package configs embeds the settings, line list, template recipes and layouts
// that duskline is delivered with.
package configs

import (
	"embed"
	"io/fs"
)

//go:embed *
var files embed.FS

// Default returns default.toml: every setting with its default value.
func Default() []byte { return mustRead("default.toml") }

// Lines returns lines.toml, the line list.
func Lines() []byte { return mustRead("lines.toml") }

// Indices returns indices.toml, definitions of indices between fixed bands.
func Indices() []byte { return mustRead("indices.toml") }

// Families returns the folder of template recipes, one TOML file a family.
func Families() fs.FS { return mustSub("families") }

// Layouts returns the folder of layout files, one for every convention of
// spectra that is known, and an example.
func Layouts() fs.FS { return mustSub("layouts") }

// mustRead panics when an embedded file is missing: the build is broken then.
func mustRead(name string) []byte {
	b, err := files.ReadFile(name)
	if err != nil {
		panic(err)
	}
	return b
}

func mustSub(name string) fs.FS {
	sub, err := fs.Sub(files, name)
	if err != nil {
		panic(err)
	}
	return sub
}
