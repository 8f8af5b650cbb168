package outside

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// witness is a test that notes how it ended.
type witness struct {
	testing.TB
	skipped, failed string
}

func (w *witness) Helper() {}
func (w *witness) Skipf(format string, args ...any) {
	w.skipped = fmt.Sprintf(format, args...)
	panic(w)
}
func (w *witness) Fatalf(format string, args ...any) {
	w.failed = fmt.Sprintf(format, args...)
	panic(w)
}

// ending returns how a test that calls f ends.
func ending(t *testing.T, f func(testing.TB)) (w *witness) {
	w = &witness{TB: t}
	defer func() {
		if r := recover(); r != nil && r != any(w) {
			panic(r)
		}
	}()
	f(w)
	return w
}

func TestWhatIsMissing(t *testing.T) {
	nowhere := t.TempDir()
	t.Setenv("DUSKLINE_SHARED", nowhere)
	for _, c := range []struct {
		want string
		need func(testing.TB)
	}{
		{"the program no-such-program is not installed", func(t testing.TB) { Program(t, "no-such-program") }},
		{"with no_such_module is not installed", func(t testing.TB) { Python(t, "no_such_module") }},
		{filepath.Join(nowhere, "spectra"), func(t testing.TB) { Spectra(t) }},
	} {
		t.Setenv("DUSKLINE_NO_SKIP", "")
		if w := ending(t, c.need); w.failed != "" || !strings.Contains(w.skipped, c.want) {
			t.Errorf("skips allowed: skipped %q, failed %q; want a skip that says %q", w.skipped, w.failed, c.want)
		}
		t.Setenv("DUSKLINE_NO_SKIP", "1")
		if w := ending(t, c.need); w.skipped != "" || !strings.Contains(w.failed, c.want) {
			t.Errorf("skips forbidden: skipped %q, failed %q; want a failure that says %q", w.skipped, w.failed, c.want)
		}
	}
}

func TestWhatIsThere(t *testing.T) {
	shared := t.TempDir()
	if err := os.Mkdir(filepath.Join(shared, "spectra"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(shared, "spectra", "truth.csv"), nil, 0o644); err != nil {
		t.Fatal(err)
	}
	t.Setenv("DUSKLINE_NO_SKIP", "1")
	t.Setenv("DUSKLINE_SHARED", shared)
	if got := Spectra(t); got != filepath.Join(shared, "spectra") {
		t.Errorf("spectra in %s", got)
	}
	if got := Program(t, "go"); got == "" {
		t.Error("no path of go")
	}
	if _, err := os.Stat(filepath.Join(repository(t), "imports_test.go")); err != nil {
		t.Errorf("repository: %v", err)
	}
}
