package catalog

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"reflect"
	"slices"
	"testing"
	"unsafe"
)

func entry(id string, change func(*Entry)) Entry {
	e := Entry{Object: Object{ObjectID: id, Class: Galaxy, Family: "emission", Verdict: Secure, Redshift: 0.5, RedshiftErr: 1e-4,
		Flags: Faint, InputDigest: "d"},
		Lines: []Line{
			{ObjectID: id, Line: "Ha", Kind: "emission", EWRest: -20, EWRestErr: 1, SNR: 20},
			{ObjectID: id, Line: "Hb", Kind: "emission", EWRest: -5, EWRestErr: 1, SNR: 5},
			{ObjectID: id, Line: "Hb", Kind: "absorption", EWRest: 3, EWRestErr: 1, SNR: 3},
			{ObjectID: id, Line: "Hd", Kind: "limit", EWRest: math.NaN(), EWRestErr: math.NaN()},
		}}
	if change != nil {
		change(&e)
	}
	return e
}

// changeCases have one change each, with the weight that it must have.
var changeCases = []struct {
	name   string
	change func(*Entry)
	weight Weight
	what   string
}{
	{"nothing", nil, Unchanged, ""},
	{"redshift within the errors", func(e *Entry) { e.Redshift += 4e-4 }, Unchanged, ""}, // 2.8 of hypot(1e-4, 1e-4)
	{"redshift a little beyond", func(e *Entry) { e.Redshift += 5e-4 }, SecureChanged, "redshift"},
	{"another redshift", func(e *Entry) { e.Redshift = 0.6 }, Contradiction, "redshift"},
	{"another class", func(e *Entry) { e.Class = Quasar }, Contradiction, "class"},
	{"no longer secure", func(e *Entry) { e.Verdict = Uncertain }, SecureChanged, "verdict"},
	{"no redshift", func(e *Entry) { e.Verdict, e.Redshift, e.RedshiftErr = None, math.NaN(), math.NaN() }, SecureChanged, "verdict redshift"},
	{"flags", func(e *Entry) { e.Flags = Tied }, DoubtsChanged, "flags"},
	{"family", func(e *Entry) { e.Family = "late" }, DoubtsChanged, "family"},
	{"width within", func(e *Entry) { e.Lines[0].EWRest = -16 }, Unchanged, ""}, // 2.8 of hypot(1, 1)
	{"width beyond", func(e *Entry) { e.Lines[0].EWRest = -15 }, LinesMoved, "1 lines"},
	{"the other component", func(e *Entry) { e.Lines[2].EWRest = 8 }, LinesMoved, "1 lines"},
	{"line lost", func(e *Entry) { e.Lines[1].Kind = "limit" }, LinesMoved, "1 lines"},
	{"line gained", func(e *Entry) { e.Lines[3].Kind = "emission" }, LinesMoved, "1 lines"},
	{"lines not measured", func(e *Entry) { e.Lines = nil }, LinesMoved, "3 lines"},
}

// Errors that grew or shrank are told, though they change no answer.
func TestChangedErrorsAreCounted(t *testing.T) {
	for _, k := range []struct {
		err  float64
		want int64
	}{{1e-4, 0}, {1.09e-4, 0}, {1.2e-4, 1}, {0.85e-4, 1}, {math.NaN(), 0}} {
		c := NewComparison(3, 10)
		check(t, c.Add(OldSide, entry("x", nil)))
		check(t, c.Add(NewSide, entry("x", func(e *Entry) { e.RedshiftErr = k.err })))
		check(t, c.Finish())
		if c.ErrorsMoved != k.want || c.Changed() != 0 {
			t.Errorf("error of %g for 1e-4: %d counted, want %d; %d changed", k.err, c.ErrorsMoved, k.want, c.Changed())
		}
	}
}

func TestChangesHaveTheirWeight(t *testing.T) {
	for _, k := range changeCases {
		c := NewComparison(3, 10)
		check(t, c.Add(OldSide, entry("x", nil)))
		check(t, c.Add(NewSide, entry("x", k.change)))
		check(t, c.Finish())
		if c.ByWeight[k.weight] != 1 || c.Matched != 1 {
			t.Errorf("%s: weights %v", k.name, c.ByWeight)
		}
		if k.weight == Unchanged {
			if c.Changed() != 0 || len(c.Changes) != 0 {
				t.Errorf("%s: counts as changed", k.name)
			}
			continue
		}
		if got := c.Changes[0].What(c.Limit); got != k.what || c.Changed() != 1 {
			t.Errorf("%s: %q, want %q", k.name, got, k.what)
		}
	}
}

// TestOrderDoesNotMatter: two catalogs in any orders, whole or in part.
func TestOrderDoesNotMatter(t *testing.T) {
	var old, now []Entry
	for i := range 300 {
		id := fmt.Sprintf("o%03d", i)
		k := changeCases[i%len(changeCases)]
		if i%17 != 0 {
			old = append(old, entry(id, nil))
		}
		if i%19 != 0 {
			now = append(now, entry(id, k.change))
		}
	}
	folder, most := t.TempDir(), waitingBytes
	compare := func(keep int) *Comparison {
		c := NewComparison(3, keep)
		c.Folder, c.join.most = folder, most
		for i := range max(len(old), len(now)) {
			if i < len(old) {
				check(t, c.Add(OldSide, old[i]))
			}
			if i < len(now) {
				check(t, c.Add(NewSide, now[i]))
			}
		}
		check(t, c.Finish())
		return c
	}
	want := compare(1000)
	if want.OnlyOld != 15 || want.OnlyNew != 17 { // multiples of 19 and of 17 below 300, but for 0
		t.Errorf("%d only old, %d only new", want.OnlyOld, want.OnlyNew)
	}
	if want.Changes[0].Weight != Contradiction || !slices.IsSortedFunc(want.Changes, func(a, b Change) int { return int(b.Weight - a.Weight) }) {
		t.Error("the changes do not come by weight")
	}
	few := compare(20)
	if len(few.Changes) != 20 || few.Changed() != want.Changed() || few.Changes[19].ObjectID != want.Changes[19].ObjectID {
		t.Error("a shorter table is not the head of the longer one")
	}
	r := rand.New(rand.NewPCG(1, 2))
	for _, most = range []int{waitingBytes, 100_000, 20_000, 3000, 1} { // in memory, in files, in files of files
		r.Shuffle(len(old), func(i, j int) { old[i], old[j] = old[j], old[i] })
		r.Shuffle(len(now), func(i, j int) { now[i], now[j] = now[j], now[i] })
		got := compare(1000)
		if got.ByWeight != want.ByWeight || !reflect.DeepEqual(got.Verdicts, want.Verdicts) || !reflect.DeepEqual(got.Lines, want.Lines) {
			t.Error("another order counts differently")
		}
		if got.OnlyOld != want.OnlyOld || got.OnlyNew != want.OnlyNew || !slices.Equal(got.Lone(OldSide, 3), want.Lone(OldSide, 3)) || len(want.Lone(NewSide, 3)) != 3 {
			t.Errorf("on one side only: %d and %d, %v", got.OnlyOld, got.OnlyNew, got.Lone(OldSide, 3))
		}
		for i := range got.Changes {
			if got.Changes[i].ObjectID != want.Changes[i].ObjectID {
				t.Fatalf("another order ranks differently at %d", i)
			}
		}
	}
	if left, err := os.ReadDir(folder); err != nil || len(left) > 0 {
		t.Errorf("left behind: %v, %v", left, err)
	}
}

func check(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// What waits is counted by these sizes.
func TestCostOfEntries(t *testing.T) {
	if o, l := unsafe.Sizeof(Object{}), unsafe.Sizeof(Line{}); o > entryCost || l > lineCost || 2*o < entryCost || 2*l < lineCost {
		t.Errorf("an object takes %d bytes and a line %d; counted are %d and %d", o, l, entryCost, lineCost)
	}
}

func TestQuantiles(t *testing.T) {
	c := NewComparison(3, 10)
	for i := range 201 { // widths shifted by -1 to 1 errors in steps of 0.01
		id := fmt.Sprint(i)
		check(t, c.Add(OldSide, entry(id, nil)))
		check(t, c.Add(NewSide, entry(id, func(e *Entry) { e.Lines[0].EWRest += math.Sqrt2 * float64(i-100) / 100 })))
	}
	check(t, c.Finish())
	s := c.Lines["Ha"]
	for q, want := range map[float64]float64{0.16: -0.68, 0.5: 0, 0.84: 0.68} {
		if got := s.Quantile(q); math.Abs(got-want) > 0.1 { // a bin
			t.Errorf("quantile %g is %g, want %g", q, got, want)
		}
	}
	if c.Lines["Hb"].Quantile(0.5) != 0 {
		t.Error("a line that did not move has a median shift")
	}
	if !math.IsNaN((&LineShift{}).Quantile(0.5)) {
		t.Error("no line has a quantile")
	}
}

func TestCauses(t *testing.T) {
	old := map[string]string{"creator": "duskline 1", "build": "b", "settings": "[run]\nblock_size = 5\n\n[lines]\nwindow_kms = 1000.0\n",
		"digest.settings": "1", "digest.lines": "2", "digest.family hot": "3", "digest.family cool": "4"}
	now := map[string]string{"creator": "duskline 1", "build": "c", "settings": "[run]\nblock_size = 5\n\n[lines]\nwindow_kms = 2000.0\n",
		"digest.settings": "9", "digest.lines": "2", "digest.family hot": "5", "digest.family odd": "6"}
	got := Causes(old, now)
	want := []string{"build of the program", "setting lines.window_kms (1000.0 and 2000.0)",
		"family cool (gone)", "family hot (changed)", "family odd (new)"}
	if !slices.Equal(got, want) {
		t.Errorf("causes are %q, want %q", got, want)
	}
	if len(Causes(old, old)) != 0 {
		t.Error("equal origins have causes")
	}
	d := Change{SameInput: true, Old: Answer{Family: "late"}, New: Answer{Family: "odd"}}
	if got := d.Cause(want); got != "family odd (new)" {
		t.Errorf("cause is %q", got)
	}
	d.SameInput = false
	if got := d.Cause(want); got != "input" {
		t.Errorf("cause is %q", got)
	}
}
