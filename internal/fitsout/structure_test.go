package fitsout

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

type tester interface {
	Helper()
	Errorf(format string, args ...any)
	Fatalf(format string, args ...any)
}

// checkHDUs walks the file by the sizes in its own headers and checks that
// every HDU is whole blocks that add up to minus zero, by one addition with
// end-around carry at a time.
func checkHDUs(t tester, file []byte, want int) {
	t.Helper()
	n := 0
	for len(file) > 0 {
		cards := map[string]string{}
		pos := 0
		for ; ; pos += 80 {
			if pos+80 > len(file) {
				t.Fatalf("HDU %d: no END", n)
			}
			card := string(file[pos : pos+80])
			if strings.TrimRight(card, " ") == "END" {
				break
			}
			if card[8:10] == "= " {
				value := card[10:30]
				if i := strings.IndexByte(value, '/'); i >= 0 {
					value = value[:i]
				}
				cards[strings.TrimSpace(card[:8])] = strings.Trim(value, "' ")
			}
		}
		head := (pos + 80 + 2879) / 2880 * 2880
		number := func(key string) int {
			v, err := strconv.Atoi(cards[key])
			if err != nil {
				t.Fatalf("HDU %d: %s = %q", n, key, cards[key])
			}
			return v
		}
		size := max(number("BITPIX"), -number("BITPIX")) / 8
		axes := number("NAXIS")
		for i := range axes {
			size *= number(fmt.Sprintf("NAXIS%d", i+1))
		}
		if axes == 0 {
			size = 0
		}
		size = (size + 2879) / 2880 * 2880
		if head+size > len(file) {
			t.Fatalf("HDU %d: header %d and data %d bytes, %d left", n, head, size, len(file))
		}
		add := func(p []byte) uint32 {
			var sum uint64
			for ; len(p) > 0; p = p[4:] {
				sum += uint64(binary.BigEndian.Uint32(p))
				if sum >= 1<<32 {
					sum = sum - 1<<32 + 1
				}
			}
			return uint32(sum)
		}
		if got := add(file[:head+size]); got != math.MaxUint32 {
			t.Errorf("HDU %d: sum %#x, want all ones", n, got)
		}
		if got := add(file[head : head+size]); cards["DATASUM"] != strconv.Itoa(int(got)) {
			t.Errorf("HDU %d: DATASUM %q, data add up to %d", n, cards["DATASUM"], got)
		}
		file = file[head+size:]
		n++
	}
	if n != want {
		t.Errorf("%d HDUs, want %d", n, want)
	}
}

// The example of FITS Standard 4.0, appendix J: a sum of 868229149 is written
// as hcHjjc9ghcEghc9g. The pair is from memory and was worked through by hand.
func TestChecksumExample(t *testing.T) {
	if got := checksum(868229149).encode(); got != "hcHjjc9ghcEghc9g" {
		t.Errorf("encode(868229149) = %q, want hcHjjc9ghcEghc9g", got)
	}
}

// Any table of any width and length keeps the two sums, and any text comes
// through a header unharmed.
func TestTableProperty(t *testing.T) {
	kinds := []Kind{Logical, Byte, Int16, Int32, Int64, Float32, Float64, Text}
	printable := rapid.StringMatching(`[ -~]{0,300}`)
	rapid.Check(t, func(t *rapid.T) {
		var cols []Column
		for i := range rapid.IntRange(1, 9).Draw(t, "columns") {
			c := Column{Name: fmt.Sprintf("c%d", i), Kind: rapid.SampledFrom(kinds).Draw(t, "kind"), Repeat: 1}
			if c.Kind != Logical {
				c.Repeat = rapid.IntRange(1, 9).Draw(t, "repeat")
			}
			cols = append(cols, c)
		}
		var m Memory
		w, err := NewWriter(&m)
		if err != nil {
			t.Fatal(err)
		}
		value := printable.Draw(t, "value")
		h := &Header{}
		h.Text("VALUE", value, printable.Draw(t, "comment"))
		h.Comment(printable.Draw(t, "prose"))
		if err := w.Empty(h); err != nil {
			t.Fatal(err)
		}
		if got := textOf(m.Bytes(), "VALUE"); got != strings.TrimRight(value, " ") {
			t.Errorf("header text %q came back as %q", value, got)
		}
		tab, err := w.Table(nil, "T", cols)
		if err != nil {
			t.Fatal(err)
		}
		for range rapid.IntRange(0, 40).Draw(t, "rows") {
			for _, c := range cols {
				switch {
				case c.Kind == Text:
					tab.Text(rapid.StringMatching(fmt.Sprintf(`[ -~]{0,%d}`, c.Repeat)).Draw(t, "text"))
				case c.Kind == Logical:
					tab.Bool(rapid.Bool().Draw(t, "bool"))
				case c.integer():
					tab.Ints(rapid.SliceOfN(rapid.Int64Range(0, 127), c.Repeat, c.Repeat).Draw(t, "ints"))
				default:
					tab.Floats(rapid.SliceOfN(rapid.Float64(), c.Repeat, c.Repeat).Draw(t, "floats"))
				}
			}
			if err := tab.EndRow(); err != nil {
				t.Fatal(err)
			}
		}
		if err := tab.Close(); err != nil {
			t.Fatal(err)
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		checkHDUs(t, m.Bytes(), 2)
	})
}

// textOf reads a string value by the rules of section 4.2.1.
func textOf(file []byte, key string) string {
	value, on := "", false
	for pos := 0; pos+80 <= len(file); pos += 80 {
		card := string(file[pos : pos+80])
		if on && !strings.HasPrefix(card, "CONTINUE  '") || !on && !strings.HasPrefix(card, fmt.Sprintf("%-8s= '", key)) {
			if on {
				break
			}
			continue
		}
		if on {
			value = strings.TrimSuffix(value, "&")
		}
		on = true
		piece := ""
		for i := 11; i < 80; i++ {
			if card[i] == '\'' {
				if i+1 < 80 && card[i+1] == '\'' {
					i++
				} else {
					break
				}
			}
			piece += string(card[i])
		}
		value += piece
		if !strings.HasSuffix(piece, "&") {
			break
		}
	}
	return strings.TrimRight(value, " ")
}

func TestASCII(t *testing.T) {
	for in, want := range map[string]string{
		"":                  "",
		`plain "text" \n`:   `plain "text" \n`,
		"caf\u00e9":         `caf\u00e9`,
		"tab\tnl\n":         `tab\tnl\n`,
		"bad \xff byte":     `bad \xff byte`,
		"ends in blank ":    `ends in blank\x20`,
		"\u2603 \"q\" \\ x": `\u2603 "q" \ x`,
		"\U0001F4A1":        `\U0001f4a1`,
	} {
		if got := ASCII(in); got != want {
			t.Errorf("ASCII(%q) = %q, want %q", in, got, want)
		}
	}
}

func TestRefusals(t *testing.T) {
	table := func(cols []Column, fill func(*Table)) func(*Writer) error {
		return func(w *Writer) error {
			if err := w.Empty(nil); err != nil {
				return err
			}
			tab, err := w.Table(nil, "T", cols)
			if err != nil {
				return err
			}
			fill(tab)
			return tab.EndRow()
		}
	}
	header := func(fill func(*Header)) func(*Writer) error {
		return func(w *Writer) error {
			h := &Header{}
			fill(h)
			return w.Empty(h)
		}
	}
	short := []Column{{Name: "a", Kind: Int16}}
	text := []Column{{Name: "a", Kind: Text, Repeat: 3}}
	one := int64(1)
	for _, c := range []struct {
		name string
		want error
		do   func(*Writer) error
	}{
		{"lower-case keyword", ErrHeader, header(func(h *Header) { h.Int("abc", 1, "") })},
		{"keyword of nine characters", ErrHeader, header(func(h *Header) { h.Int("ABCDEFGHI", 1, "") })},
		{"structural keyword", ErrHeader, header(func(h *Header) { h.Int("NAXIS2", 1, "") })},
		{"keyword set twice", ErrHeader, header(func(h *Header) { h.Int("A", 1, ""); h.Int("A", 2, "") })},
		{"NaN in a header", ErrHeader, header(func(h *Header) { h.Float("A", math.NaN(), "") })},
		{"text that is not ASCII", ErrHeader, header(func(h *Header) { h.Text("A", "\u00e9", "") })},
		{"comment with a line break", ErrHeader, header(func(h *Header) { h.Comment("a\nb") })},
		{"table first", ErrOrder, func(w *Writer) error { _, err := w.Table(nil, "T", short); return err }},
		{"second primary", ErrOrder, func(w *Writer) error { return errors.Join(w.Empty(nil), w.Empty(nil)) }},
		{"no HDU", ErrOrder, (*Writer).Close},
		{"image while a table is open", ErrOrder, func(w *Writer) error {
			_ = w.Empty(nil)
			_, _ = w.Table(nil, "T", short)
			return WriteImage(w, nil, "I", []int{1}, []uint8{1})
		}},
		{"no columns", ErrHeader, table(nil, func(*Table) {})},
		{"same name in other case", ErrHeader, table([]Column{{Name: "a", Kind: Byte}, {Name: "A", Kind: Byte}}, func(*Table) {})},
		{"name of 69 characters", ErrHeader, table([]Column{{Name: strings.Repeat("a", 69), Kind: Byte}}, func(*Table) {})},
		{"null of a number column", ErrHeader, table([]Column{{Name: "a", Kind: Float32, Null: &one}}, func(*Table) {})},
		{"axes against repeat", ErrHeader, table([]Column{{Name: "a", Kind: Float32, Repeat: 3, Dim: []int{2, 2}}}, func(*Table) {})},
		{"vector of logical values", ErrHeader, table([]Column{{Name: "a", Kind: Logical, Repeat: 2}}, func(*Table) {})},
		{"unknown kind", ErrHeader, table([]Column{{Name: "a", Kind: 'Z'}}, func(*Table) {})},
		{"integer out of range", ErrCell, table(short, func(t *Table) { t.Int(40000) })},
		{"number in an integer column", ErrCell, table(short, func(t *Table) { t.Float(1) })},
		{"text too long", ErrCell, table(text, func(t *Table) { t.Text("abcd") })},
		{"text not ASCII", ErrCell, table(text, func(t *Table) { t.Text("\t") })},
		{"vector in a scalar", ErrCell, table(short, func(t *Table) { t.Ints([]int64{1, 2}) })},
		{"column left out", ErrCell, table(short, func(*Table) {})},
		{"value too many", ErrCell, table(short, func(t *Table) { t.Int(1); t.Int(1) })},
	} {
		t.Run(c.name, func(t *testing.T) {
			w, err := NewWriter(&Memory{})
			if err != nil {
				t.Fatal(err)
			}
			if err := c.do(w); !errors.Is(err, c.want) {
				t.Errorf("error %v, want one that is %q", err, c.want)
			}
			if err := w.Close(); err == nil {
				t.Error("Close of a writer that failed returns nil")
			}
		})
	}
}

// failAfter fails once a number of bytes was written.
type failAfter struct {
	Memory
	left int
}

var errDisk = errors.New("disk full")

func (f *failAfter) Write(p []byte) (int, error) {
	if f.left -= len(p); f.left < 0 {
		return 0, errDisk
	}
	return f.Memory.Write(p)
}

// A write that fails anywhere, also in the header's second writing, is
// reported by Close.
func TestWriteErrors(t *testing.T) {
	write := func(out io.WriteSeeker) error {
		w, err := NewWriter(out)
		if err != nil {
			return err
		}
		_ = w.Empty(nil)
		_ = WriteImage(w, nil, "I", []int{3000}, make([]uint8, 3000))
		return w.Close()
	}
	// Two headers written twice and two blocks of data.
	const total = 6 * 2880
	if err := write(&failAfter{left: total}); err != nil {
		t.Fatalf("with room for all: %v", err)
	}
	for left := 0; left < total; left += 720 {
		if err := write(&failAfter{left: left}); !errors.Is(err, errDisk) {
			t.Errorf("disk full after %d bytes: Close returns %v", left, err)
		}
	}
}

func BenchmarkTable(b *testing.B) {
	cols := []Column{{Name: "id", Kind: Text, Repeat: 20}}
	for i := range 20 {
		cols = append(cols, Column{Name: fmt.Sprintf("v%d", i), Kind: Float64})
	}
	var m Memory
	for b.Loop() {
		m.Reset()
		w, err := NewWriter(&m)
		if err != nil {
			b.Fatal(err)
		}
		_ = w.Empty(nil)
		tab, err := w.Table(nil, "T", cols)
		if err != nil {
			b.Fatal(err)
		}
		for r := range 10000 {
			tab.Text("lantern-ridge-117")
			for i := range 20 {
				tab.Float(float64(r * i))
			}
			if err := tab.EndRow(); err != nil {
				b.Fatal(err)
			}
		}
		if err := tab.Close(); err != nil {
			b.Fatal(err)
		}
	}
	b.SetBytes(int64(len(m.Bytes())))
}
