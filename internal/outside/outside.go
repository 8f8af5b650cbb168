// Package outside is for tests that need something from outside the repository:
// a program, a Python with libraries, the folder of open spectra. It holds the
// one rule for what is missing: the test is skipped with the reason, or fails
// with it where DUSKLINE_NO_SKIP=1. Only test files import it.
package outside

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// Missing skips the test for want of something outside the repository, or fails
// it where skips are forbidden. The text says what is missing and how to get it.
func Missing(t testing.TB, format string, args ...any) {
	t.Helper()
	if os.Getenv("DUSKLINE_NO_SKIP") == "1" {
		t.Fatalf("skips are forbidden, and "+format, args...)
	}
	t.Skipf(format, args...)
}

// Program returns the path of an installed program.
func Program(t testing.TB, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		Missing(t, "the program %s is not installed; .ci/run lists the packages", name)
	}
	return path
}

// CProgram compiles a source in C against a library and returns the program.
func CProgram(t testing.TB, source, library string) string {
	t.Helper()
	out := filepath.Join(t.TempDir(), "program")
	if text, err := exec.Command(Program(t, "gcc"), "-O2", "-o", out, source, "-l"+library).CombinedOutput(); err != nil {
		Missing(t, "%s cannot be compiled against lib%s; .ci/run lists the packages: %v %s", source, library, err, text)
	}
	return out
}

// python is the interpreter of the system, for which the gate installs packages.
const python = "/usr/bin/python3"

// Python returns the interpreter of the system, which can import the modules.
func Python(t testing.TB, modules ...string) string {
	t.Helper()
	if out, err := exec.Command(python, "-c", "import "+strings.Join(modules, ", ")).CombinedOutput(); err != nil {
		Missing(t, "%s with %s is not installed; .ci/run lists the packages: %v %s", python, strings.Join(modules, ", "), err, out)
	}
	return python
}

// Spectra returns the folder of open spectra with published answers:
// ../shared/spectra beside the repository, or spectra in the folder that
// DUSKLINE_SHARED names.
func Spectra(t testing.TB) string {
	t.Helper()
	shared := os.Getenv("DUSKLINE_SHARED")
	if shared == "" {
		shared = filepath.Join(repository(t), "..", "shared")
	}
	dir := filepath.Join(shared, "spectra")
	if _, err := os.Stat(filepath.Join(dir, "truth.csv")); err != nil {
		Missing(t, "there is no folder of open spectra with published answers at %s; set DUSKLINE_SHARED to its parent", dir)
	}
	return dir
}

// repository is the folder of go.mod: tests run in the folder of their package.
func repository(t testing.TB) string {
	t.Helper()
	dir, err := filepath.Abs(".")
	if err != nil {
		t.Fatal(err)
	}
	for at := dir; ; at = filepath.Dir(at) {
		if _, err := os.Stat(filepath.Join(at, "go.mod")); err == nil {
			return at
		}
		if at == filepath.Dir(at) {
			t.Fatalf("no go.mod above %s", dir)
		}
	}
}
