package fitsread

import (
	"bytes"
	"errors"
	"fmt"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/internal/outside"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// Tables that cfitsio compresses are read as the same tables plain: all types of
// column that astropy writes for TestFilesOfAstropy, in one tile and in several, by
// the methods that cfitsio chooses and by each alone.
func TestTablesPackedByCfitsio(t *testing.T) {
	python, cfitsio := outside.Python(t, "astropy"), outside.CProgram(t, filepath.Join("testdata", "cfitsio.c"), "cfitsio")
	dir := t.TempDir()
	// cfitsio leaves small tables as they are: 1,000 pixels.
	if err := exec.Command(python, filepath.Join("testdata", "live_files.py"), dir, "1000").Run(); err != nil {
		t.Fatal(err)
	}
	paths, err := filepath.Glob(filepath.Join(dir, "*.fits"))
	if err != nil {
		t.Fatal(err)
	}
	ways := []struct{ rows, method string }{{"77", ""}, {"1000", ""}, {"500", "GZIP_1"}, {"500", "GZIP_2"}, {"500", "RICE_1"}}
	if testing.Short() {
		ways = ways[:1]
	}
	packed, refused := 0, 0
	for _, path := range paths {
		name := strings.TrimSuffix(filepath.Base(path), ".fits")
		plain, err := Open(path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		at := plain.plan.groups[0].arms[0].flux
		if plain.Close(); at.col == nil || at.hdu.kind == kindASCII || at.hdu.index != 1 {
			continue
		}
		for _, how := range ways {
			out := filepath.Join(t.TempDir(), name+".fits") // of the same name, which becomes that of the object
			if text, err := exec.Command(cfitsio, "pack", path, out, how.rows, how.method).CombinedOutput(); err != nil {
				t.Errorf("%s: %v %s", name, err, text)
				continue
			}
			f, err := Open(out, Options{})
			if at.col.heap != 0 {
				if !errors.Is(err, ErrCompressed) || !strings.Contains(fmt.Sprint(err), "funpack") {
					t.Errorf("%s: arrays on the heap: %v", name, err)
				}
				refused++
				continue
			}
			if err != nil {
				t.Errorf("%s %v: %v", name, how, err)
				continue
			}
			f.Close()
			samePacked(t, path, out)
			packed++
		}
	}
	if packed < 30*len(ways) || refused == 0 {
		t.Errorf("%d packed files compared, %d refused: the test is blind", packed, refused)
	}
	t.Logf("%d packed files compared, %d refused", packed, refused)
}

func samePacked(t *testing.T, path, packed string) {
	t.Helper()
	a, err := Open(path, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer a.Close()
	b, err := Open(packed, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	if b.hdus[1].packed == nil {
		t.Errorf("%s is not packed", packed)
	}
	for i := range a.Count() {
		s, u := read(t, a, i), read(t, b, i)
		s.SourceFile, s.InputDigest = u.SourceFile, u.InputDigest
		if d := cmp.Diff(s, u, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("%s, spectrum %d:\n%s", filepath.Base(path), i, d)
		}
	}
	// Digests of rows do not depend on what was read before.
	c, err := Open(packed, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	last := a.Count() - 1
	if x, y := read(t, c, last).InputDigest, read(t, b, last).InputDigest; x != y {
		t.Errorf("%s: the digest is %s, and %s after other rows", filepath.Base(path), x, y)
	}
}

// packTable writes a table of numbers compressed in tiles of so many rows.
func packTable(method string, rows, tileRows int, cols []tcol) []byte {
	var packed []tcol
	var head []string
	width, tiles := 0, 0
	for k, c := range cols {
		col := column{form: c.form}
		if !col.readForm() {
			panic("test writes a bad form " + c.form)
		}
		width += int(col.width)
		var arrays [][]float64
		for first := 0; first < rows; first += tileRows {
			n := min(tileRows, rows-first)
			raw := encode(col.code, c.data[first*int(col.repeat):(first+n)*int(col.repeat)])
			if method == "GZIP_1" {
				raw = gzipped(raw)
			}
			bytes := make([]float64, len(raw))
			for i, b := range raw {
				bytes[i] = float64(b)
			}
			arrays = append(arrays, bytes)
		}
		tiles = len(arrays)
		packed = append(packed, tcol{name: c.name, form: "1PB(999)", unit: c.unit, arrays: arrays})
		head = append(head, kv(fmt.Sprintf("ZFORM%d", k+1), c.form), kv(fmt.Sprintf("ZCTYP%d", k+1), method))
	}
	head = append(head, kv("ZTABLE", true), kv("ZTILELEN", tileRows), kv("ZNAXIS1", width), kv("ZNAXIS2", rows), kv("ZPCOUNT", 0))
	return join(empty(), table("T", tiles, packed, head...))
}

// packedTable is a compressed table of one column of bytes as they are.
func packedTable(cards ...string) []byte {
	arrays := [][]float64{{1, 2, 3, 4, 5, 6, 7, 8}, {9, 10, 11, 12}}
	head := map[string]string{"ZTABLE": kv("ZTABLE", true), "ZTILELEN": kv("ZTILELEN", 2), "ZNAXIS1": kv("ZNAXIS1", 4), "ZNAXIS2": kv("ZNAXIS2", 3),
		"ZPCOUNT": kv("ZPCOUNT", 0), "ZFORM1": kv("ZFORM1", "J"), "ZCTYP1": kv("ZCTYP1", "NOCOMPRESS")}
	for _, c := range cards {
		head[strings.TrimSpace(c[:8])] = c
	}
	var list []string
	for _, key := range []string{"ZTABLE", "ZTILELEN", "ZNAXIS1", "ZNAXIS2", "ZPCOUNT", "ZFORM1", "ZCTYP1"} {
		list = append(list, head[key])
	}
	return join(empty(), table("T", 2, []tcol{{name: "FLUX", form: "1QB(8)", arrays: arrays}}, list...))
}

// Compressed tables whose description lies, each with what it must say.
func TestHostilePackedTables(t *testing.T) {
	rows, err := packedRows(packedTable(), 1<<20)
	if err != nil || fmt.Sprint(rows) != "[1.690906e+07 8.4281096e+07 1.51653132e+08]" {
		t.Errorf("%v, %v", rows, err) // 0x01020304, 0x05060708, 0x090a0b0c
	}
	for _, tt := range []struct {
		card, want string
		kind       error
	}{
		{kv("ZNAXIS2", 9), "9 rows in tiles of 2, and 2 tiles", ErrBadHeader},
		{kv("ZNAXIS2", -3), "is missing or no size", ErrBadHeader},
		{kv("ZNAXIS1", 8), "NAXIS1 says 8", ErrBadHeader},
		{kv("ZTILELEN", 0), "ZTILELEN = 0", ErrBadHeader},
		{kv("ZTILELEN", 3), "3 rows in tiles of 3, and 2 tiles", ErrBadHeader},
		{kv("ZFORM1", "999999999J"), "the columns take", ErrBadHeader},
		{kv("ZNAXIS1", 2000000000), "6000000000 bytes cannot come out of", ErrBadHeader},
		{kv("ZFORM1", "I"), "the columns take 2 bytes a row", ErrBadHeader},
		{kv("ZCTYP1", "GZIP_1"), "tile 1 of the compressed table cannot be unpacked", ErrBadData},
		{kv("ZCTYP1", "RICE_1"), "tile 2 of the compressed table cannot be unpacked", ErrBadData},
		{kv("ZCTYP1", "MAGIC_7"), "", nil},
		{kv("ZFORM1", "1PE(4)"), "", nil},
	} {
		data := packedTable(tt.card)
		hdus, err := walk(bytes.NewReader(data), int64(len(data)))
		if err != nil {
			t.Fatal(err)
		}
		if tt.kind == nil || strings.Contains(tt.card, "1PE") {
			if hdus[1].kind != kindPacked && hdus[1].broken == nil {
				t.Errorf("%s: is read", tt.card)
			}
			continue
		}
		if _, err = packedRows(data, 1<<20); !errors.Is(err, tt.kind) || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s: %v, want %q", tt.card, err, tt.want)
		}
	}
	if _, err = packedRows(packedTable(), 11); !errors.Is(err, ErrTooLarge) {
		t.Errorf("12 bytes above a limit of 11: %v", err)
	}
}

// packedRows reads the column of a packedTable.
func packedRows(data []byte, limit int64) ([]float64, error) {
	f := &File{path: "packed.fits", opts: Options{MaxPixels: 1 << 22, MaxUnpacked: limit}, src: &source{ReaderAt: bytes.NewReader(data), size: int64(len(data))}}
	var err error
	if f.hdus, err = walk(f.src, f.src.size); err != nil {
		return nil, err
	}
	h := f.hdus[1]
	if h.broken != nil {
		return nil, h.broken
	}
	v, err := f.scalarColumns(h, []*column{&h.columns[0]})
	if err != nil {
		return nil, err
	}
	return v[0], nil
}
