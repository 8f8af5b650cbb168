package pipeline

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"duskline/configs"

	"github.com/pelletier/go-toml/v2"
)

// Problem is one thing that is wrong with a settings file.
type Problem struct {
	Key  string // such as "run.block_size"; empty when the text is no TOML
	Text string // what is wrong and what is allowed
}

// SettingsError reports every problem of a settings file at once.
type SettingsError struct{ Problems []Problem }

// Error gives one line a problem.
func (e *SettingsError) Error() string {
	lines := make([]string, len(e.Problems))
	for i, p := range e.Problems {
		lines[i] = p.Text
		if p.Key != "" {
			lines[i] = p.Key + ": " + p.Text
		}
	}
	return strings.Join(lines, "\n")
}

// checker is a section with rules across its keys. It names the keys in full.
type checker interface{ check() []Problem }

// DefaultSettings returns the settings of configs/default.toml.
func DefaultSettings() Settings {
	var set Settings
	if err := decodeSettings(configs.Default(), &set); err != nil {
		panic("configs/default.toml: " + err.Error()) // the build is broken
	}
	return set
}

// ParseSettings reads a settings file over the defaults: keys that the text
// does not name keep their default. An unknown key, a value of the wrong kind
// or outside its range, and a broken rule across keys are all reported
// together in a *SettingsError.
func ParseSettings(text []byte) (Settings, error) {
	return DefaultSettings().Over(text)
}

// Over reads a settings file over s: keys that the text does not name stay as
// they are. Problems are reported as by ParseSettings.
func (s Settings) Over(text []byte) (Settings, error) {
	set := s
	if err := decodeSettings(text, &set); err != nil {
		return Settings{}, err
	}
	return set, nil
}

// Check reports every value outside its range in a *SettingsError, as
// ParseSettings does for settings that came from a file.
func (s Settings) Check() error { return decodeSettings(s.TOML(), &s) }

// TOML returns the settings as the text of a settings file with every key.
func (s Settings) TOML() []byte {
	b, err := toml.Marshal(s)
	if err != nil {
		panic(err) // plain structs of numbers and words always marshal
	}
	return b
}

// Essential returns the settings with the keys marked free left at zero: what
// results depend on.
func (s Settings) Essential() Settings {
	clearFree(reflect.ValueOf(&s).Elem())
	return s
}

// Digest identifies the settings that results depend on: the first 16
// hexadecimal digits of the SHA-256 of their TOML text.
func (s Settings) Digest() string {
	sum := sha256.Sum256(s.Essential().TOML())
	return hex.EncodeToString(sum[:8])
}

// Differences names every key on which the two settings do not agree, with
// both values, leaving out the keys marked free.
func (s Settings) Differences(other Settings) []string {
	return differences("", reflect.ValueOf(s), reflect.ValueOf(other))
}

func differences(prefix string, a, b reflect.Value) []string {
	var out []string
	for i := range a.NumField() {
		f := a.Type().Field(i)
		key := prefix + f.Tag.Get("toml")
		switch {
		case f.Type.Kind() == reflect.Struct:
			out = append(out, differences(key+".", a.Field(i), b.Field(i))...)
		case f.Tag.Get("free") != "true" && !reflect.DeepEqual(a.Field(i).Interface(), b.Field(i).Interface()):
			out = append(out, fmt.Sprintf("%s (%v and %v)", key, a.Field(i), b.Field(i)))
		}
	}
	return out
}

func clearFree(v reflect.Value) {
	for i := range v.NumField() {
		if f := v.Type().Field(i); f.Type.Kind() == reflect.Struct {
			clearFree(v.Field(i))
		} else if f.Tag.Get("free") == "true" {
			v.Field(i).SetZero()
		}
	}
}

// decodeSettings lays a TOML text over the struct that dst points to. It walks
// the parsed tables itself instead of stopping at the first complaint.
func decodeSettings(text []byte, dst any) error {
	var tables map[string]any
	if err := toml.Unmarshal(text, &tables); err != nil {
		var at *toml.DecodeError
		if errors.As(err, &at) {
			row, col := at.Position()
			return &SettingsError{[]Problem{{Text: fmt.Sprintf("line %d, column %d is not TOML: %s", row, col,
				strings.TrimPrefix(at.Error(), "toml: "))}}}
		}
		return &SettingsError{[]Problem{{Text: "not TOML: " + err.Error()}}}
	}
	v := reflect.ValueOf(dst).Elem()
	problems := layTable("", tables, v)
	if len(problems) == 0 {
		problems = checkRules(v)
	}
	if len(problems) > 0 {
		return &SettingsError{problems}
	}
	return nil
}

func checkRules(v reflect.Value) []Problem {
	var problems []Problem
	if c, ok := v.Addr().Interface().(checker); ok {
		problems = c.check()
	}
	for i := range v.NumField() {
		if v.Field(i).Kind() == reflect.Struct {
			problems = append(problems, checkRules(v.Field(i))...)
		}
	}
	return problems
}

func layTable(prefix string, table map[string]any, v reflect.Value) []Problem {
	var problems []Problem
	known := make(map[string]bool, v.NumField())
	var keys []string
	for i := range v.NumField() {
		f := v.Type().Field(i)
		key := f.Tag.Get("toml")
		known[key] = true
		keys = append(keys, key)
		value, ok := table[key]
		if !ok {
			continue
		}
		if f.Type.Kind() == reflect.Struct {
			sub, ok := value.(map[string]any)
			if !ok {
				problems = append(problems, Problem{prefix + key, fmt.Sprintf("is a section, write [%s%s]", prefix, key)})
				continue
			}
			problems = append(problems, layTable(prefix+key+".", sub, v.Field(i))...)
			continue
		}
		if text := layValue(value, v.Field(i), f.Tag); text != "" {
			problems = append(problems, Problem{prefix + key, text})
		}
	}
	var strange []string
	for key := range table {
		if !known[key] {
			strange = append(strange, key)
		}
	}
	slices.Sort(strange)
	slices.Sort(keys)
	for _, key := range strange {
		text := "is not a setting; known here: " + strings.Join(keys, ", ")
		if len(keys) == 0 {
			text = "is not a setting; this section has none"
		}
		problems = append(problems, Problem{prefix + key, text})
	}
	return problems
}

// layValue sets one field and returns what is wrong with the value, empty if
// nothing is.
func layValue(value any, field reflect.Value, tag reflect.StructTag) string {
	wrong := func() string { return fmt.Sprintf("%v is not allowed; want %s", value, allowed(field.Type(), tag)) }
	switch field.Kind() {
	case reflect.Bool:
		b, ok := value.(bool)
		if !ok {
			return wrong()
		}
		field.SetBool(b)
	case reflect.Int:
		n, ok := value.(int64)
		if !ok || !inRange(float64(n), tag) {
			return wrong()
		}
		field.SetInt(n)
	case reflect.Float64:
		x, ok := value.(float64)
		if n, isInt := value.(int64); isInt {
			x, ok = float64(n), true
		}
		if !ok || !inRange(x, tag) {
			return wrong()
		}
		field.SetFloat(x)
	case reflect.String:
		s, ok := value.(string)
		if oneof := tag.Get("oneof"); !ok || oneof != "" && !slices.Contains(strings.Split(oneof, ","), s) {
			return wrong()
		}
		field.SetString(s)
	case reflect.Slice:
		list, ok := value.([]any)
		if !ok {
			return wrong()
		}
		out := reflect.MakeSlice(field.Type(), len(list), len(list))
		for i, element := range list {
			if layValue(element, out.Index(i), tag) != "" {
				return wrong()
			}
		}
		field.Set(out)
	default:
		panic("settings: no rule for a field of type " + field.Type().String())
	}
	return ""
}

// inRange is false for NaN: no setting may be one.
func inRange(x float64, tag reflect.StructTag) bool {
	low, high := limit(tag, "min"), limit(tag, "max")
	return x == x && (low == nil || x >= *low) && (high == nil || x <= *high)
}

func limit(tag reflect.StructTag, name string) *float64 {
	text, ok := tag.Lookup(name)
	if !ok {
		return nil
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		panic(fmt.Sprintf("settings: tag %s:%q is not a number", name, text))
	}
	return &x
}

// allowed describes what a key takes, such as "a whole number from 1 to 64".
func allowed(t reflect.Type, tag reflect.StructTag) string {
	if t.Kind() == reflect.Slice {
		return "a list, each element " + allowed(t.Elem(), tag)
	}
	if words := tag.Get("oneof"); words != "" {
		return "one of " + strings.ReplaceAll(words, ",", ", ")
	}
	what := map[reflect.Kind]string{reflect.Bool: "true or false", reflect.Int: "a whole number",
		reflect.Float64: "a number", reflect.String: "a text in quotes"}[t.Kind()]
	low, hasLow := tag.Lookup("min")
	high, hasHigh := tag.Lookup("max")
	switch {
	case hasLow && hasHigh:
		what += " from " + low + " to " + high
	case hasLow:
		what += ", at least " + low
	case hasHigh:
		what += ", at most " + high
	}
	return what
}
