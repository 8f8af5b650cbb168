package pipeline_test

import (
	"bytes"
	"compress/gzip"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
)

// plainTable is a FITS binary table of scalar columns, by upper-case name:
// enough for the surveys' own results, whose other tables hold types that
// fitsio does not know.
type plainTable struct {
	numbers map[string][]float64
	words   map[string][]string
}

// plainTables reads the binary tables of a FITS file (standard 4.0, sections 3.3
// and 7.3). Columns that are no single number and no text are left out.
func plainTables(path string) ([]plainTable, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	if strings.HasSuffix(path, ".gz") {
		z, err := gzip.NewReader(bytes.NewReader(b))
		if err != nil {
			return nil, err
		}
		if b, err = io.ReadAll(z); err != nil {
			return nil, err
		}
	}
	const block = 2880
	var tables []plainTable
	for len(b) >= block {
		cards := map[string]string{}
		at, end := 0, false
		for ; !end && at+80 <= len(b); at += 80 {
			card := string(b[at : at+80])
			key := strings.TrimSpace(card[:8])
			if end = key == "END"; end || card[8:10] != "= " {
				continue
			}
			value := strings.TrimSpace(card[10:])
			if strings.HasPrefix(value, "'") {
				value = strings.TrimSpace(strings.SplitN(value[1:], "'", 2)[0])
			} else {
				value = strings.TrimSpace(strings.SplitN(value, "/", 2)[0])
			}
			cards[key] = value
		}
		num := func(key string, missing int) int {
			v, err := strconv.Atoi(cards[key])
			if err != nil {
				return missing
			}
			return v
		}
		at = (at + block - 1) / block * block
		size := 0
		if n := num("NAXIS", 0); n > 0 {
			size = 1
			for k := range n {
				size *= num(fmt.Sprintf("NAXIS%d", k+1), 0)
			}
			size = (size + num("PCOUNT", 0)) * num("GCOUNT", 1) * max(num("BITPIX", 8), -num("BITPIX", 8)) / 8
		}
		if !end || at+size > len(b) {
			return tables, nil // a damaged tail
		}
		if cards["XTENSION"] == "BINTABLE" {
			tables = append(tables, plainRows(b[at:at+size], cards, num))
		}
		b = b[min(len(b), at+(size+block-1)/block*block):]
	}
	return tables, nil
}

func plainRows(data []byte, cards map[string]string, num func(string, int) int) plainTable {
	t := plainTable{map[string][]float64{}, map[string][]string{}}
	width, rows, offset := num("NAXIS1", 0), num("NAXIS2", 0), 0
	for k := 1; k <= num("TFIELDS", 0); k++ {
		form := cards[fmt.Sprintf("TFORM%d", k)]
		i := strings.IndexAny(form, "LXBIJKAEDCMPQ")
		if i < 0 {
			break
		}
		count := 1
		if i > 0 {
			count, _ = strconv.Atoi(form[:i])
		}
		name := strings.ToUpper(cards[fmt.Sprintf("TTYPE%d", k)])
		bytesOf := map[byte]int{'L': 1, 'B': 1, 'I': 2, 'J': 4, 'K': 8, 'A': 1, 'E': 4, 'D': 8, 'C': 8, 'M': 16, 'P': 8, 'Q': 16}
		for r := range rows {
			cell := data[r*width+offset:]
			switch {
			case form[i] == 'A':
				t.words[name] = append(t.words[name], strings.TrimRight(string(cell[:count]), " \x00"))
			case count != 1:
			case form[i] == 'E':
				t.numbers[name] = append(t.numbers[name], float64(math.Float32frombits(binary.BigEndian.Uint32(cell))))
			case form[i] == 'D':
				t.numbers[name] = append(t.numbers[name], math.Float64frombits(binary.BigEndian.Uint64(cell)))
			}
		}
		if form[i] == 'X' {
			offset += (count + 7) / 8
		} else {
			offset += count * bytesOf[form[i]]
		}
	}
	return t
}
