package checkvalues

import (
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

// failing stands for a test and keeps what it was failed with.
type failing struct {
	testing.TB
	said string
}

func (f *failing) Helper()           {}
func (f *failing) Fatal(args ...any) { f.said = fmt.Sprint(args...); runtime.Goexit() }
func (f *failing) Fatalf(format string, args ...any) {
	f.said = fmt.Sprintf(format, args...)
	runtime.Goexit()
}

// fails returns what a test that does this is failed with.
func fails(do func(t testing.TB)) string {
	f := &failing{}
	done := make(chan struct{})
	go func() {
		defer close(done)
		do(f)
	}()
	<-done
	return f.said
}

func TestRead(t *testing.T) {
	path := func(text string) string {
		name := filepath.Join(t.TempDir(), "v.csv")
		if err := os.WriteFile(name, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
		return name
	}
	c := Read(t, path("# source\nline,wave\n\"H, alpha\",6564.61\nHb,x\n"), 2)
	if c.Len() != 2 || c.Text(0, "line") != "H, alpha" || c.Number(0, "wave") != 6564.61 {
		t.Errorf("%d rows, first %q %g", c.Len(), c.Text(0, "line"), c.Number(0, "wave"))
	}
	if Number(t, "-2.5e3") != -2500 {
		t.Error("-2.5e3 is read as another number")
	}
	for name, tt := range map[string]struct {
		do   func(t testing.TB)
		want string
	}{
		"too few rows":    {func(t testing.TB) { Read(t, path("a\n1\n"), 2) }, "1 rows, want at least 2"},
		"nothing":         {func(t testing.TB) { Rows(t, path("# only words\n")) }, "has no rows"},
		"no file":         {func(t testing.TB) { Rows(t, "gone.csv") }, "gone.csv"},
		"uneven rows":     {func(t testing.TB) { Rows(t, path("a,b\n1\n")) }, "wrong number of fields"},
		"no such column":  {func(tb testing.TB) { Read(tb, path("a\n1\n"), 1).Text(0, "b") }, `no column "b"`},
		"no number":       {func(tb testing.TB) { Read(tb, path("a\nx\n"), 1).Number(0, "a") }, "row 1, column a"},
		"text, no number": {func(tb testing.TB) { Number(tb, "x") }, "invalid syntax"},
	} {
		if said := fails(tt.do); !strings.Contains(said, tt.want) {
			t.Errorf("%s: failed with %q, want %q", name, said, tt.want)
		}
	}
}
