package fitsread

import (
	"bytes"
	"errors"
	"flag"
	"fmt"
	"maps"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
	"time"
)

var mutants = flag.Int("mutants", 2000, "how many changed files TestMutants tries")

// tryBytes is tryFile for a file in memory; a panic is not caught.
func tryBytes(t testing.TB, data []byte, opts Options) (spectra int, err error) {
	t.Helper()
	file := &File{path: "mutant.fits", opts: opts, src: &source{ReaderAt: bytes.NewReader(data), size: int64(len(data))}}
	if err = file.load(); err == nil {
		spectra, err = tryAll(t, file)
	}
	var re *ReadError
	if err != nil && (!errors.As(err, &re) || re.Hint == "" || errors.Is(err, ErrInternal)) {
		t.Fatalf("%#v: %v", err, err)
	}
	return spectra, err
}

// lies are what the cards of sizes are made to say.
var lies = []string{"0", "-1", "1", "2", "3", "7", "8", "16", "-32", "-64", "36", "999", "1000", "32767", "65536", "99999", "2147483647", "2147483648",
	"4294967296", "100000000000", "9223372036854775807", "9223372036854775808", "1E9", "NaN", "T", "'x'", ""}

// mutate changes a file in one to four places: single bytes, cards, sizes, cuts at
// the edges of blocks and anywhere, blocks left out or doubled.
func mutate(r *rand.Rand, data []byte) []byte {
	m := slices.Clone(data)
	for range 1 + r.IntN(4) {
		if len(m) < cardLen {
			return m
		}
		i := r.IntN(len(m))
		switch r.IntN(9) {
		case 0:
			m[i] = byte(r.IntN(256))
		case 1:
			m[i] ^= 1 << r.IntN(8)
		case 2:
			m[i] = "0123456789-TPQEDKX'= "[r.IntN(21)]
		case 3: // another card in this one's place
			j, k := i/cardLen*cardLen, r.IntN(len(m)/cardLen)*cardLen
			copy(m[j:], m[k:k+cardLen])
		case 4, 5: // a size lies
			if at := someSize(r, m); at >= 0 {
				copy(m[at+10:at+30], fmt.Sprintf("%20s", lies[r.IntN(len(lies))]))
			}
		case 6: // cut at the edge of a block or beside it
			m = m[:min(max(r.IntN(len(m)/blockLen+1)*blockLen+r.IntN(3)-1, 0), len(m))]
		case 7:
			m = m[:i]
		case 8: // a block left out or doubled
			if from := i / blockLen * blockLen; r.IntN(2) == 0 {
				m = slices.Delete(m, from, min(from+blockLen, len(m)))
			} else {
				m = slices.Insert(m, from, m[from:min(from+blockLen, len(m))]...)
			}
		}
	}
	return m
}

// someSize finds a card that says how large something is.
func someSize(r *rand.Rand, m []byte) int {
	first := r.IntN(len(m) / cardLen)
	for k := range len(m) / cardLen {
		at := (first + k) % (len(m) / cardLen) * cardLen
		key := string(m[at : at+8])
		for _, size := range []string{"NAXIS", "BITPIX", "PCOUNT", "GCOUNT", "TFIELDS", "TFORM", "THEAP", "ZNAXIS", "ZTILE", "ZBITPIX", "ZVAL", "ZFORM", "ZCTYP", "TBCOL", "CRPIX", "CDELT", "CRVAL"} {
			if strings.HasPrefix(key, size) && at+30 <= len(m) {
				return at
			}
		}
	}
	return -1
}

// Files changed at random give spectra that keep the contract, or an error that
// says what to do. With -mutants 100000 -v it also tells how long the slowest took
// and how much memory the process had at most.
func TestMutants(t *testing.T) {
	all := samples()
	for name, list := range layoutSamples() {
		for i, data := range list {
			all[fmt.Sprint(name, " ", i)] = data
		}
	}
	delete(all, "gzipped") // its bytes are not those of FITS
	names := slices.Sorted(maps.Keys(all))
	opts := Options{MaxPixels: 1 << 22, MaxUnpacked: 1 << 30, Layouts: []Layout{example(t)}} // the limits of users
	n := *mutants
	if testing.Short() {
		n = min(n, 300)
	}
	read, kinds := 0, map[string]int{}
	var slowest time.Duration
	for i := range n {
		r := rand.New(rand.NewPCG(7, uint64(i)))
		data := mutate(r, all[names[i%len(names)]])
		begin := time.Now()
		_, err := tryBytes(t, data, opts)
		slowest = max(slowest, time.Since(begin))
		if err == nil {
			read++
			continue
		}
		for _, kind := range []error{ErrNotFITS, ErrTruncated, ErrBadHeader, ErrTooLarge, ErrCompressed, ErrNoSpectrum, ErrLayout, ErrBadData} {
			if errors.Is(err, kind) {
				kinds[kind.Error()]++
			}
		}
	}
	t.Logf("%d mutants of %d files: %d read, the others %v; the slowest took %v", n, len(names), read, kinds, slowest)
	if status, err := os.ReadFile("/proc/self/status"); err == nil {
		for line := range strings.Lines(string(status)) {
			if strings.HasPrefix(line, "VmHWM") {
				t.Logf("peak memory: %s", strings.TrimSpace(strings.TrimPrefix(line, "VmHWM:")))
			}
		}
	}
	if read == 0 || read == n {
		t.Errorf("%d of %d mutants were read: nothing was tried", read, n)
	}
}
