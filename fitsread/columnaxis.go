package fitsread

import (
	"fmt"
	"strings"
)

// cellAxis reads the wavelengths of the arrays in a column from such cards.
func cellAxis(h *hdu, c *column) (w wavePlan, ok bool) {
	if c == nil {
		return w, false
	}
	a, ok, err := readAxis(columnAxis(h.header, c.number), 1)
	if !ok || err != nil || a.algorithm == "TAB" {
		return w, false
	}
	w = axisWave(&a, h)
	w.cells = c
	return w, true
}

// columnAxis returns, as image cards, the description of the axis of the arrays
// in column n of a table, FITS standard 4.0, table 22: 1CTYPn for CTYPE1, 1CRVLn,
// 1CDLTn, 1CRPXn, 1CUNIn, 11CDn, RFRQn, RWAVn; nil where there is none.
func columnAxis(h header, n int) header {
	cards := map[string]string{}
	for form, image := range map[string]string{"1CTYP%d": "CTYPE1", "1CUNI%d": "CUNIT1", "1CRVL%d": "CRVAL1", "1CDLT%d": "CDELT1", "1CRPX%d": "CRPIX1",
		"11CD%d": "CD1_1", "11PC%d": "PC1_1", "RFRQ%d": "RESTFRQ", "RWAV%d": "RESTWAV"} {
		cards[fmt.Sprintf(form, n)] = image
	}
	var out header
	spectral := false
	for _, c := range h {
		image, ok := cards[c.key]
		if !ok {
			continue
		}
		c.key = image
		out = append(out, c)
		if image == "CTYPE1" {
			code, _ := splitType(strings.ToUpper(c.value()))
			_, spectral = axisCodes[code]
		}
	}
	if !spectral {
		return nil
	}
	return out
}
