package fitsread

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

// packedImage writes an image of n pixels a line, a tile a line, from the bytes of
// its tiles.
func packedImage(method string, bitpix, n int, lines [][]byte, cards ...string) []byte {
	arrays := make([][]float64, len(lines))
	for i, l := range lines {
		for _, b := range l {
			arrays[i] = append(arrays[i], float64(b))
		}
	}
	head := []string{kv("ZIMAGE", true), kv("ZCMPTYPE", method), kv("ZBITPIX", bitpix), kv("ZNAXIS", 2), kv("ZNAXIS1", n), kv("ZNAXIS2", len(lines))}
	return join(empty(), table("", len(lines), []tcol{{name: "COMPRESSED_DATA", form: "1PB(999)", arrays: arrays}}, append(append(head, cards...), logAxis...)...))
}

// riceUnpacked writes whole numbers in Rice's code without packing any block:
// every block says that its differences stand as they are.
func riceUnpacked(values []float64) []byte {
	var bits []byte // one a bit
	put := func(v uint64, n int) {
		for i := n - 1; i >= 0; i-- {
			bits = append(bits, byte(v>>i&1))
		}
	}
	last := uint32(int32(values[0]))
	put(uint64(last), 32)
	for i, v := range values {
		if i%32 == 0 {
			put(26, 5)
		}
		d := int32(uint32(int32(v)) - last)
		put(uint64(uint32(d<<1)^uint32(d>>31)), 32)
		last = uint32(int32(v))
	}
	out := make([]byte, (len(bits)+7)/8)
	for i, b := range bits {
		out[i/8] |= b << (7 - i%8)
	}
	return out
}

// whole rounds noise to whole numbers.
func whole(n int, level float64) []float64 {
	v := noisy(n, 5)
	for i := range v {
		v[i] = math.Round(v[i] + level)
	}
	return v
}

// packedSamples are compressed images of every method that is read.
func packedSamples() map[string][]byte {
	n := 40
	a, b := whole(n, 500), whole(n, 900)
	mask := []byte{}
	for _, w := range []uint16{0, 7, 0xff9c, 12, 0, 0, 0, 0x4000 | 30, 0x2000 | 3, 0x4000 | 5, 0x6000 | 1, 0x5000 | 4} {
		mask = binary.BigEndian.AppendUint16(mask, w)
	}
	shuffled := func(v []float64) []byte {
		plain := encode('J', v)
		out := make([]byte, len(plain))
		for i := range v {
			for k := range 4 {
				out[k*len(v)+i] = plain[4*i+k]
			}
		}
		return gzipped(out)
	}
	return map[string][]byte{
		"rice":  packedImage("RICE_1", 32, n, [][]byte{riceUnpacked(a), riceUnpacked(b)}, kv("ZNAME1", "BLOCKSIZE"), kv("ZVAL1", 32), kv("ZNAME2", "BYTEPIX"), kv("ZVAL2", 4)),
		"gzip":  packedImage("GZIP_1", -32, n, [][]byte{gzipped(encode('E', a)), gzipped(encode('E', b))}),
		"gzip2": packedImage("GZIP_2", -32, n, [][]byte{shuffled(a), shuffled(b)}, kv("ZSCALE", 0.5), kv("ZZERO", 100.0), kv("ZQUANTIZ", "SUBTRACTIVE_DITHER_2"), kv("ZDITHER0", 5)),
		"plio":  packedImage("PLIO_1", 16, n, [][]byte{mask, mask}),
	}
}

// The encoders above against the decoders; live_files_test.go has those of others.
func TestPackedImages(t *testing.T) {
	n := 40
	data := packedSamples()
	for name, code := range map[string]byte{"rice": 'J', "gzip": 'E'} {
		f := open(t, data[name], Options{})
		if f.Count() != 2 {
			t.Fatalf("%s: %d spectra", name, f.Count())
		}
		for i, want := range [][]float64{whole(n, 500), whole(n, 900)} {
			got := read(t, f, i).Segments[0].Flux
			if !bytes.Equal(encode(code, got), encode(code, want)) {
				t.Errorf("%s: %v\nwant %v", name, got, want)
			}
		}
	}
	// Half a step of the scale is the most that dithering leaves.
	s := read(t, open(t, data["gzip2"], Options{}), 1)
	for i, v := range whole(n, 900) {
		if want := 0.5*v + 100; math.Abs(s.Segments[0].Flux[i]-want) > 0.25+1e-6 {
			t.Errorf("pixel %d: %g, want %g within a quarter", i, s.Segments[0].Flux[i], want)
		}
	}
	// FITS standard 4.0, appendix I: the last seed of the sequence is 1043618065.
	if r := ditherSequence(); float64(r[ditherLen-1]) != float64(float32(1043618065.0/2147483647)) {
		t.Errorf("the last number is %g", r[ditherLen-1])
	}
	// By hand, FITS standard 4.0, table 40: 30 pixels of 1, the value up by 3 and 5
	// pixels of it, up by 1 and one pixel, then three zeros and a last 5.
	want := append(append(constant(30, 1), constant(5, 4)...), 5, 0, 0, 0, 5)
	f := open(t, data["plio"], Options{})
	if got, err := f.imageLine(f.hdus[1], 0, int64(n)); err != nil || !bytes.Equal(encode('I', got), encode('I', want)) {
		t.Errorf("PLIO: %v, %v", got, err)
	}
}

// What a compressed image says about itself is held against the file.
func TestHostileTiles(t *testing.T) {
	good := string(packedSamples()["rice"])
	card := func(key, value string) []byte {
		i := strings.Index(good, fmt.Sprintf("%-8s=", key))
		if i < 0 {
			t.Fatalf("no card %s", key)
		}
		return []byte(good[:i+10] + fmt.Sprintf("%-70s", value) + good[i+80:])
	}
	for name, tt := range map[string]struct {
		data []byte
		kind error
	}{
		"a line of 2e9 pixels":     {card("ZNAXIS1", "2000000000"), ErrBadHeader},
		"1e6 lines":                {card("ZNAXIS2", "1000000"), ErrBadHeader},
		"no axes":                  {card("ZNAXIS", "0"), ErrBadHeader},
		"BITPIX of 7":              {card("ZBITPIX", "7"), ErrBadHeader},
		"Rice with floating point": {card("ZBITPIX", "-32"), ErrBadHeader},
		"blocks of 1e9":            {card("ZVAL1", "1000000000"), ErrBadHeader},
		"an unknown method":        {card("ZCMPTYPE", "'BEST_OF_ALL'"), ErrCompressed},
		"HCOMPRESS":                {card("ZCMPTYPE", "'HCOMPRESS_1'"), ErrCompressed},
		"data cut":                 {[]byte(good[:len(good)-blockLen]), ErrTruncated},
		"bytes that end too early": {packedImage("RICE_1", 32, 40, [][]byte{{1, 2, 3}, {0, 0, 0, 1, 7, 7}}), ErrBadData},
		"gzip of something else":   {packedImage("GZIP_1", 32, 40, [][]byte{gzipped([]byte("abc")), gzipped(nil)}), ErrBadData},
		"a gzip bomb":              {packedImage("GZIP_1", 32, 40, [][]byte{gzipped(make([]byte, 1<<22)), gzipped(nil)}), ErrBadData},
		"PLIO without end":         {packedImage("PLIO_1", 32, 40, [][]byte{{0, 0, 0, 7, 127, 255}, {0}}), ErrBadData},
		"a packed table of arrays": {packedTable(kv("ZFORM1", "1PE(4)"), kv("ZNAXIS1", 8)), ErrCompressed},
	} {
		f, err := Open(save(t, tt.data), Options{})
		if err == nil {
			_, err = f.Read(0)
			f.Close()
		}
		var re *ReadError
		if !errors.Is(err, tt.kind) || !errors.As(err, &re) || re.Hint == "" {
			t.Errorf("%s: %v, want %v", name, err, tt.kind)
		}
		if tt.kind == ErrCompressed && !strings.Contains(err.Error(), "funpack") {
			t.Errorf("%s: %v does not say how to unpack it", name, err)
		}
	}
}

// FuzzTiles: no bytes make the decoders of tiles stop, or write beyond the tile.
func FuzzTiles(f *testing.F) {
	f.Add(byte(0), riceUnpacked(whole(70, 9)))
	f.Add(byte(3), []byte{0, 0, 0, 7, 0, 12, 0, 0, 0, 0, 0, 0, 0x40, 30, 0x20, 3, 0x40, 5})
	f.Add(byte(4), gzipped(encode('J', whole(70, 9))))
	f.Add(byte(5), gzipped(encode('E', whole(70, 9))))
	f.Fuzz(func(t *testing.T, how byte, raw []byte) {
		tl := tiles{block: 32, bytePix: []int{4, 2, 1}[how%3], pixelSize: 4, isFloat: how&8 != 0}
		tl.method = []string{"RICE_1", "RICE_1", "RICE_1", "PLIO_1", "GZIP_1", "GZIP_2", "NOCOMPRESS"}[how%7]
		out := make([]float64, 70)
		if err := tl.decode(out, raw); err == nil && tl.method == "RICE_1" && len(raw) < tl.bytePix {
			t.Error("read more than there is")
		}
	})
}

// A flux in the primary HDU stays the flux when compressing moves it.
func TestPackedPrimary(t *testing.T) {
	n := 40
	named := func(name string, v []float64) []byte {
		return image(false, -32, []int{n, 2}, append(append([]float64{}, v...), v...), kv("EXTNAME", name))
	}
	flux := packedImage("RICE_1", 32, n, [][]byte{riceUnpacked(whole(n, 500)), riceUnpacked(whole(n, 900))}, kv("EXTNAME", "COMPRESSED_IMAGE"))
	s := read(t, open(t, join(flux, image(false, -64, []int{n}, ramp(n, 5000, 2), kv("EXTNAME", "WAVELENGTH")), named("IVAR", constant(n, 0.04))), Options{}), 1)
	if s.Layout != layoutImages || s.Segments[0].Flux[3] != whole(n, 900)[3] || s.Segments[0].Wave[3] != 5006 {
		t.Errorf("%s: %v %v", s.Layout, s.Segments[0].Wave[:4], s.Segments[0].Flux[:4])
	}
}
