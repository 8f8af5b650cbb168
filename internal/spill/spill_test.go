package spill

import (
	"errors"
	"fmt"
	"maps"
	"math/rand/v2"
	"os"
	"slices"
	"sync"
	"testing"

	"pgregory.net/rapid"
)

// keyNumber makes keys that crowd in the same slots; the first is all zeros, which
// marks free slots.
func keyNumber(n int) Key {
	if n == 0 {
		return Key{}
	}
	return Key{byte(n), byte(n >> 8), 15: 1}
}

// A Map that spills answers as a map in memory does, whatever comes in which
// order.
func TestMapIsAMap(t *testing.T) {
	folder := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		m := &Map{Folder: folder, Most: rapid.IntRange(1, 50).Draw(t, "most")}
		defer m.Close()
		want := map[Key]Value{}
		for range rapid.IntRange(0, 3000).Draw(t, "puts") {
			n := rapid.Uint32Range(0, 2000).Draw(t, "key")
			k, v := keyNumber(int(n)), Value{int64(n) - 7, rapid.Int64().Draw(t, "value")}
			_, had := want[k]
			isNew, err := m.Put(k, v)
			if err != nil || isNew == had {
				t.Fatalf("key %v: new %v, %v", k, isNew, err)
			}
			want[k] = v
		}
		for n := range 2100 {
			k := keyNumber(n)
			v, ok, err := m.Get(k)
			w, had := want[k]
			if err != nil || ok != had || v != w {
				t.Fatalf("key %v: %v %v, %v, want %v %v", k, v, ok, err, w, had)
			}
		}
	})
	empty(t, folder)
}

// Several goroutines may ask at the same time, also a file.
func TestMapIsReadByMany(t *testing.T) {
	m := &Map{Folder: t.TempDir(), Most: 10}
	defer m.Close()
	const n = 5000
	for i := range n {
		if _, err := m.Put(KeyOf(fmt.Sprint(i)), Value{int64(i), -1}); err != nil {
			t.Fatal(err)
		}
	}
	var g sync.WaitGroup
	for k := range 4 {
		g.Go(func() {
			for i := k; i < n; i += 3 {
				if v, ok, err := m.Get(KeyOf(fmt.Sprint(i))); !ok || err != nil || v != (Value{int64(i), -1}) {
					t.Errorf("%d: %v, %v, %v", i, v, ok, err)
				}
			}
		})
	}
	g.Wait()
	if m.Len() != n {
		t.Errorf("%d keys", m.Len())
	}
}

// A Sorter that spills yields what sorting in memory does, twice.
func TestSorterSorts(t *testing.T) {
	folder := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		texts := rapid.SliceOf(rapid.SampledFrom([]string{"", "a", "a\x00f", "ab", "ab\xff", "b/c", "B", "long " + string(make([]byte, 300))})).Draw(t, "texts")
		s := &Sorter{Folder: folder, Most: rapid.IntRange(1, 400).Draw(t, "most")}
		defer s.Close()
		for _, x := range texts {
			if err := s.Add(x); err != nil {
				t.Fatal(err)
			}
		}
		for range 2 {
			var got []string
			if err := s.Each(func(x string) error { got = append(got, x); return nil }); err != nil {
				t.Fatal(err)
			}
			if !slices.Equal(got, slices.Sorted(slices.Values(texts))) {
				t.Fatalf("%q gives %q", texts, got)
			}
		}
		stop := errors.New("enough")
		if err := s.Each(func(string) error { return stop }); len(texts) > 0 && !errors.Is(err, stop) {
			t.Fatalf("a visit that stops: %v", err)
		}
	})
	empty(t, folder)
}

// Nothing is left of a file, and a folder that takes none is done without.
func TestFileHasNoName(t *testing.T) {
	for _, folder := range []string{t.TempDir(), "/nowhere"} {
		f, err := File(folder)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := f.WriteString("x"); err != nil {
			t.Fatal(err)
		}
		if _, err := os.Stat(f.Name()); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s has a name", f.Name())
		}
		f.Close()
	}
}

func empty(t *testing.T, folder string) {
	t.Helper()
	if left, err := os.ReadDir(folder); err != nil || len(left) > 0 {
		t.Errorf("left behind: %v, %v", left, err)
	}
}

// BenchmarkMap is of a million entries, ten times what is kept in memory.
func BenchmarkMap(b *testing.B) {
	for b.Loop() {
		m := &Map{Folder: b.TempDir()}
		r := rand.New(rand.NewPCG(1, 2))
		keys := map[int]Key{}
		for i := range 1_000_000 {
			k := KeyOf(fmt.Sprint("night/lr-", i, ".fits"))
			if r.IntN(1000) == 0 {
				keys[i] = k
			}
			if _, err := m.Put(k, Value{int64(i)}); err != nil {
				b.Fatal(err)
			}
		}
		for _, i := range slices.Sorted(maps.Keys(keys)) {
			if v, ok, err := m.Get(keys[i]); !ok || err != nil || v[0] != int64(i) {
				b.Fatal(v, ok, err)
			}
		}
		m.Close()
	}
}
