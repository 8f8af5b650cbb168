package pipeline

import (
	"errors"
	"reflect"
	"strings"
	"testing"

	"duskline/configs"

	"github.com/pelletier/go-toml/v2"
)

// TestEverySettingHasADefault holds sections.go and default.toml together.
func TestEverySettingHasADefault(t *testing.T) {
	var tables map[string]any
	if err := toml.Unmarshal(configs.Default(), &tables); err != nil {
		t.Fatal(err)
	}
	var walk func(prefix string, typ reflect.Type, table map[string]any)
	walk = func(prefix string, typ reflect.Type, table map[string]any) {
		for i := range typ.NumField() {
			f := typ.Field(i)
			key := f.Tag.Get("toml")
			value, ok := table[key]
			if !ok {
				t.Errorf("%s%s has no default in configs/default.toml", prefix, key)
				continue
			}
			if f.Type.Kind() == reflect.Struct {
				walk(prefix+key+".", f.Type, value.(map[string]any))
			}
		}
	}
	walk("", reflect.TypeFor[Settings](), tables)
}

func TestSettingsRoundTrip(t *testing.T) {
	set := DefaultSettings()
	again, err := ParseSettings(set.TOML())
	if err != nil || !reflect.DeepEqual(set, again) {
		t.Errorf("read back as %+v, %v", again, err)
	}
	if err := set.Check(); err != nil {
		t.Errorf("the defaults: %v", err)
	}
}

func TestSettingsKeepDefaults(t *testing.T) {
	set, err := ParseSettings([]byte("[run]\nworkers = 3\n"))
	if err != nil || set.Run.Workers != 3 || set.Run.BlockSize != DefaultSettings().Run.BlockSize {
		t.Errorf("got %+v, %v", set.Run, err)
	}
}

func TestDigestLeavesFreeKeysOut(t *testing.T) {
	a, b := DefaultSettings(), DefaultSettings()
	b.Run.Workers = 5
	if a.Digest() != b.Digest() || len(a.Differences(b)) != 0 {
		t.Error("the number of workers counts as a difference")
	}
	b.Run.BlockSize = 5
	if a.Digest() == b.Digest() || len(a.Differences(b)) != 1 {
		t.Error("the block size does not count as a difference")
	}
}

// sample has a field of every kind that settings may have.
type sample struct {
	Flag  bool    `toml:"flag"`
	Count int     `toml:"count" min:"1" max:"9"`
	Size  float64 `toml:"size" min:"0.5"`
	Top   float64 `toml:"top" max:"2"`
	Word  string  `toml:"word" oneof:"red,blue"`
	Range struct {
		Values []float64 `toml:"values" min:"0" max:"1"`
	} `toml:"range"`
}

func (s *sample) check() []Problem {
	if s.Size > s.Top {
		return []Problem{{"size", "is above top"}}
	}
	return nil
}

func TestSettingsReportEveryProblem(t *testing.T) {
	text := `
flag = 1
count = 10
size = "big"
top = nan
word = "green"
colour = 3
[range]
values = [0.5, 7]
other = 1
`
	var s sample
	err := decodeSettings([]byte(text), &s)
	var problems *SettingsError
	if !errors.As(err, &problems) {
		t.Fatalf("got %v, want a SettingsError", err)
	}
	want := `flag: 1 is not allowed; want true or false
count: 10 is not allowed; want a whole number from 1 to 9
size: big is not allowed; want a number, at least 0.5
top: NaN is not allowed; want a number, at most 2
word: green is not allowed; want one of red, blue
range.values: [0.5 7] is not allowed; want a list, each element a number from 0 to 1
range.other: is not a setting; known here: values
colour: is not a setting; known here: count, flag, range, size, top, word`
	if err.Error() != want {
		t.Errorf("got\n%v\nwant\n%s", err, want)
	}
}

func TestSettingsOfEveryKind(t *testing.T) {
	var s sample
	err := decodeSettings([]byte("flag = true\ncount = 2\nsize = 1\ntop = 1.5\nword = \"red\"\nrange.values = [0, 0.5]\n"), &s)
	if err != nil || !s.Flag || s.Count != 2 || s.Size != 1 || s.Word != "red" || !reflect.DeepEqual(s.Range.Values, []float64{0, 0.5}) {
		t.Errorf("got %+v, %v", s, err)
	}
	if err := decodeSettings([]byte("size = 1.9\ntop = 1\n"), &s); err == nil || !strings.Contains(err.Error(), "size: is above top") {
		t.Errorf("the rule across keys: %v", err)
	}
	if err := decodeSettings([]byte("range = 3\n"), &s); err == nil || !strings.Contains(err.Error(), "write [range]") {
		t.Errorf("a section as value: %v", err)
	}
}

func TestSettingsThatAreNoTOML(t *testing.T) {
	_, err := ParseSettings([]byte("[run]\nblock_size = = 3\n"))
	if err == nil || !strings.Contains(err.Error(), "line 2") {
		t.Errorf("got %v, want the line", err)
	}
}
