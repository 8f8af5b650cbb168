package main

import (
	"fmt"
	"io/fs"
	"os"
	"strings"

	"duskline/configs"
	"duskline/fitsread"
	"duskline/pipeline"
)

// writeLayout drafts a layout for the file of the command. It reports false, and
// says what to do, when the file is not understood and the draft must be edited.
// An existing file is never overwritten.
func (c *peekCmd) writeLayout(a *app, opts fitsread.Options) (understood bool, err error) {
	draft, err := fitsread.DraftLayout(a.locate(c.File), opts)
	if err != nil {
		return false, c.unreadable(err)
	}
	out, err := os.OpenFile(a.locate(c.Write), os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return false, &pipeline.InputError{Problems: []string{fmt.Sprintf("the layout cannot be written: %v; give another --write-layout", err)}}
	}
	_, err = out.WriteString(draft.Text)
	if closeErr := out.Close(); err == nil {
		err = closeErr
	}
	if err != nil {
		return false, fmt.Errorf("the layout cannot be written: %w", err)
	}
	if draft.Understood {
		fmt.Fprintf(a.stdout, "A layout that reads %s as shown here is in %s.\n\n", c.File, c.Write)
		return true, nil
	}
	fmt.Fprintf(a.stdout, "%s is not understood. A first draft of a layout is in %s: look at the lines marked EDIT, then try\n  duskline peek --layout %s %s\n",
		c.File, c.Write, c.Write, c.File)
	return false, nil
}

// builtInLayout returns the layout file of that name that comes with the program.
func builtInLayout(name string) ([]byte, bool) {
	if strings.ContainsAny(name, "./\\") {
		return nil, false
	}
	text, err := fs.ReadFile(configs.Layouts(), name+".toml")
	return text, err == nil
}

// builtInLayouts names the layouts that come with the program.
func builtInLayouts() []string {
	entries, err := fs.ReadDir(configs.Layouts(), ".")
	if err != nil {
		panic("configs/layouts: " + err.Error()) // the build is broken
	}
	var names []string
	for _, e := range entries {
		if name, ok := strings.CutSuffix(e.Name(), ".toml"); ok {
			names = append(names, name)
		}
	}
	return names
}
