package redshift

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"

	"github.com/pelletier/go-toml/v2"
)

// decodeRecipe reads the TOML of a recipe. Unknown keys are reported, each with
// its component, and leave the rest to be checked; a text that is no TOML, or
// a value of the wrong type, leaves nothing, and the recipe is nil.
func decodeRecipe(file string, text []byte) (*Recipe, []error) {
	r := &Recipe{}
	err := toml.NewDecoder(bytes.NewReader(text)).DisallowUnknownFields().Decode(r)
	if err == nil {
		return r, nil
	}
	var strict *toml.StrictMissingError
	var wrong *toml.DecodeError
	switch {
	case errors.As(err, &strict):
		var errs []error
		for i := range strict.Errors {
			e := &strict.Errors[i]
			row, _ := e.Position()
			errs = append(errs, fmt.Errorf("%s: %sunknown keys are refused: %s in line %d", file, r.at(text, row), strings.Join(e.Key(), "."), row))
		}
		return r, errs
	case errors.As(err, &wrong):
		row, column := wrong.Position()
		return nil, []error{fmt.Errorf("%s: %sline %d, column %d: %s", file, r.at(text, row), row, column, strings.TrimPrefix(wrong.Error(), "toml: "))}
	}
	return nil, []error{fmt.Errorf("%s: %w", file, err)}
}

// at names the component that a line of the text belongs to, if any.
func (r *Recipe) at(text []byte, row int) string {
	component := -1
	for i, line := range strings.Split(string(text), "\n") {
		if i >= row {
			break
		}
		if strings.HasPrefix(strings.TrimSpace(line), "[[component]]") {
			component++
		}
	}
	switch {
	case component < 0:
		return ""
	case component < len(r.Components) && r.Components[component].Name != "":
		return fmt.Sprintf("component %q: ", r.Components[component].Name)
	}
	return fmt.Sprintf("component %d: ", component+1)
}

// digest identifies a recipe's text and the composites it draws on.
func digest(text []byte, components []component) string {
	sum := sha256.New()
	sum.Write(text)
	for i := range components {
		if c := components[i].stack; c != nil {
			fmt.Fprintf(sum, "\nstack %d %s", i, c.Digest)
		}
	}
	return hex.EncodeToString(sum.Sum(nil)[:8])
}
