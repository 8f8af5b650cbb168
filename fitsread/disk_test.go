package fitsread

import (
	"bytes"
	"errors"
	"io"
	"maps"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"syscall"
	"testing"
	"testing/iotest"

	"duskline/internal/outside"
)

// failing is a file whose server goes away after some reads, for once or for good.
type failing struct {
	io.ReaderAt
	left int
	once bool
}

func (f *failing) ReadAt(b []byte, off int64) (int, error) {
	if f.left--; f.left == -1 || f.left < 0 && !f.once {
		return 0, syscall.ESTALE
	}
	return f.ReaderAt.ReadAt(b, off)
}

// Wherever a read fails the spectrum is an error with the system's reason, never
// one with a piece silently missing.
func TestDiskThatFails(t *testing.T) {
	all := samples()
	delete(all, "gzipped") // is read whole when it is opened
	delete(all, "example") // needs its layout
	for i, data := range layoutSamples()["arm-images"] {
		all["arm-images "+string(rune('0'+i))] = data
	}
	all["packed cells"] = packTable("GZIP_1", 2, 1, []tcol{{name: "TARGETID", form: "K", data: []float64{11, 12}},
		{name: "WAVE", form: "40D", unit: "nm", data: ramp(80, 400, 1)}, {name: "FLUX", form: "40E", data: noisy(80, 1)}})
	points := 0
	for _, name := range slices.Sorted(maps.Keys(all)) {
		for try := 0; ; try++ {
			reads := try / 2
			disk := &failing{bytes.NewReader(all[name]), reads, try%2 == 1}
			f := &File{path: "away.fits", opts: Options{MaxPixels: 1 << 22, MaxUnpacked: 1 << 30}, src: &source{ReaderAt: disk, size: int64(len(all[name]))}}
			err := f.load()
			if err == nil {
				_, err = f.Read(0)
			}
			if disk.left >= 0 { // it did not fail
				if err != nil {
					t.Errorf("%s: %v", name, err)
				}
				break
			}
			points++
			var re *ReadError
			if !errors.Is(err, syscall.ESTALE) || !errors.As(err, &re) || re.Hint == "" {
				t.Errorf("%s, after %d reads, for once %v: %v", name, reads, disk.once, err)
			}
		}
	}
	if points < 100 {
		t.Errorf("only %d reads failed: the test is blind", points)
	}
}

// The same of a gzipped file, which is read whole when it is opened.
func TestDiskThatFailsUnderGzip(t *testing.T) {
	data := gzipped(pixelTable(2000))
	for _, n := range []int{0, 5, len(data) / 2} {
		away := iotest.ErrReader(syscall.ESTALE)
		_, err := unpack(io.MultiReader(bytes.NewReader(data[:n]), away), 1<<30)
		if !errors.Is(err, syscall.ESTALE) || errors.Is(err, ErrTruncated) {
			t.Errorf("after %d bytes: %v", n, err)
		}
	}
}

// A file that this user may not read. For root the file system is asked as nobody.
func TestNoPermission(t *testing.T) {
	dir := t.TempDir()
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	secret := filepath.Join(dir, "secret.fits")
	if err := os.WriteFile(secret, pixelTable(64), 0); err != nil {
		t.Fatal(err)
	}
	if os.Geteuid() == 0 {
		runtime.LockOSThread()
		defer runtime.UnlockOSThread()
		if err := asNobody(); err != nil {
			outside.Missing(t, "the rights of root cannot be laid down: %v", err)
		}
	}
	_, err := Open(secret, Options{})
	if os.Geteuid() == 0 {
		if err := asRoot(); err != nil { // for the folder of this test
			t.Fatal(err)
		}
	}
	var re *ReadError
	if !errors.Is(err, os.ErrPermission) || !errors.As(err, &re) || re.Hint != "give read permission" {
		t.Errorf("%v", err)
	}
}
