package fitsread

import "fmt"

// layoutSamples are invented files of the kinds of configs/layouts, one or several
// a layout, by its name.
func layoutSamples() map[string][][]byte {
	const n = 64
	col := func(name, form, unit string, data []float64, more ...stem) tcol {
		return tcol{name: name, form: form, unit: unit, data: data, more: more}
	}
	primary := empty(kv("VACUUM", true), kv("SPECSYS", "BARYCENT"))
	rows := func(cols ...tcol) []byte { return join(primary, table("SPECTRUM", n, cols)) }
	rowCells := func(rows int, cols ...tcol) []byte { return join(primary, table("SPECTRA", rows, cols)) }
	vector := func(code string) string { return fmt.Sprintf("%d%s", n, code) }
	image1 := func(cards ...string) []byte { return image(true, -32, []int{n}, noisy(n, 1), cards...) }
	stated := append([]string{kv("VACUUM", true), kv("SPECSYS", "BARYCENT")}, logAxis...)
	bits := constant(n, 0)
	bits[7], bits[9] = 4, 1024 // 1024 is none of 31743
	orders := rowCells(2, col("SPORDER", "I", "", []float64{1, 2}), col("NELEM", "I", "", []float64{n, n - 4}), col("WAVELENGTH", vector("D"), "Angstrom", ramp(2*n, 1500, 0.1)),
		col("FLUX", vector("E"), "", noisy(2*n, 1)), col("ERROR", vector("E"), "", constant(2*n, 1)), col("DQ", vector("I"), "", append(bits, constant(n, 0)...)))
	arm := func(name string, start float64) []byte {
		return table(name, 1, []tcol{col("SPEC", vector("E"), "", noisy(n, 1)), col("LAMBDA", vector("E"), "", ramp(n, start, 2)), col("IVAR", vector("E"), "", constant(n, 1))},
			kv("AIRMASS", 1.2))
	}
	var arms [][]byte
	for k, name := range []string{"B", "R", "Z"} {
		arms = append(arms, image(false, -64, []int{n}, ramp(n, 3600+1500*float64(k), 0.8), kv("EXTNAME", name+"_WAVELENGTH"), kv("BUNIT", "Angstrom")),
			image(false, -32, []int{n, 2}, noisy(2*n, 1), kv("EXTNAME", name+"_FLUX")),
			image(false, -32, []int{n, 2}, constant(2*n, 1), kv("EXTNAME", name+"_IVAR")),
			image(false, -32, []int{n, 3, 2}, stack(constant(n, 1), constant(n, 2), constant(n, 1), constant(n, 1), constant(n, 3), constant(n, 1)), kv("EXTNAME", name+"_RESOLUTION")))
	}
	targets := table("FIBERMAP", 2, []tcol{col("TARGETID", "K", "", []float64{11, 12}), col("TARGET_RA", "D", "deg", []float64{10, 11}), col("TARGET_DEC", "D", "deg", []float64{-3, -4})})
	utypes := func(form string) []tcol {
		return []tcol{col("C1", form+"D", "nm", ramp(n, 400, 0.1), stem{"TUTYP", "spec:Spectrum.Data.SpectralAxis.Value"}, stem{"TUCD", "em.wl"}),
			col("C2", form+"E", "", noisy(n, 1), stem{"TUTYP", "spec:Spectrum.Data.FluxAxis.Value"}),
			col("C3", form+"E", "", constant(n, 1), stem{"TUTYP", "spec:Spectrum.Data.FluxAxis.Accuracy.StatError"})}
	}
	ucds := []tcol{col("X", "D", "nm", ramp(n, 400, 0.1), stem{"TUCD", "em.wl;obs.atmos"}), col("Y", "E", "", noisy(n, 1), stem{"TUCD", "phot.flux.density;em.wl"}),
		col("E", "E", "", constant(n, 1), stem{"TUCD", "stat.error;phot.flux.density;em.wl"})}
	wave := ramp(n, 4000, 1.5)
	good := constant(n, 1)
	good[20] = 0
	return map[string][][]byte{
		"axis-image": {image1(stated...), samples()["table axis"],
			image1(kv("CTYPE1", "WAVE-F2W"), kv("CRVAL1", 5e-7), kv("CDELT1", 1e-10), kv("CRPIX1", 1)),
			image1(kv("CTYPE1", "FREQ"), kv("CRVAL1", 5e14), kv("CDELT1", -1e11), kv("CUNIT1", "Hz"), kv("CRPIX1", 1)),
			image1(kv("CRVAL1", 3.6), kv("CD1_1", 1e-4), kv("CRPIX1", 1), kv("DC-FLAG", 1))},
		"axis-cells": {rowCells(2, col("FLUX", vector("E"), "", noisy(2*n, 1), stem{"1CTYP", "WAVE"}, stem{"1CRVL", 500.0}, stem{"1CDLT", 0.1}, stem{"1CRPX", 1.0}, stem{"1CUNI", "nm"}))},
		"ivar-lines": {image(true, -32, []int{n, 5}, stack(noisy(n, 1), constant(n, 1), noisy(n, 1), constant(n, 0), constant(n, 0)),
			append([]string{kv("ROW1", "Flux"), kv("ROW2", "Inverse Variance"), kv("ROW3", "Continuum-subtracted flux"), kv("ROW4", "andmask"), kv("ROW5", "ormask")}, stated...)...)},
		"sigma-lines": {image(true, -32, []int{n, 3}, stack(noisy(n, 1), noisy(n, 1), constant(n, 1)),
			append([]string{kv("ARRAY1", "SPECTRUM"), kv("ARRAY2", "CONTINUUM-SUBTRACTED SPECTRUM"), kv("ARRAY3", "ERROR")}, stated...)...)},
		"loglam-rows": {rows(col("flux", "E", "", noisy(n, 1)), col("loglam", "E", "", ramp(n, 3.6, 1e-4)), col("ivar", "E", "", constant(n, 1)),
			col("and_mask", "J", "", bits), col("wdisp", "E", "", constant(n, 1.1)))},
		"error-rows": {rows(col("WAVE", "D", "Angstrom", wave), col("FLUX", "E", "", noisy(n, 1)), col("ERR", "E", "", constant(n, 1)))},
		"flux-rows":  {rows(col("WAVELENGTH", "D", "Angstrom", wave), col("FLUX", "E", "", noisy(n, 1)))},
		"staterror-rows": {rows(col("WAVELENGTH", "D", "ANGSTROMS", wave), col("FLUX", "E", "", noisy(n, 1)), col("STATERROR", "E", "", constant(n, 1)),
			col("SYSERROR", "E", "", constant(n, 1)), col("FWHM", "E", "", constant(n, 5)), col("DATAQUAL' / 1 = good, 0 = bad", "I", "", good))},
		"error-cells": {rowCells(2, col("WAVE", vector("D"), "Angstrom", ramp(2*n, 4000, 1)), col("FLUX", vector("E"), "", noisy(2*n, 1)), col("ERROR", vector("E"), "", constant(2*n, 1)))},
		"order-cells": {join(empty(kv("SDQFLAGS", 31743), kv("VACUUM", true), kv("SPECSYS", "HELIOCEN")), orders[len(primary):])},
		"arm-cells":   {join(empty(kv("SPECSYS", "TOPOCENT")), arm("Horne-B", 6000), arm("Horne-R", 7000))},
		"arm-images":  {join(append(append([][]byte{primary}, targets), arms...)...)},
		"ivoa-utypes": {rows(utypes("")...), rowCells(1, utypes(fmt.Sprint(n))...)},
		"ivoa-ucds":   {rows(ucds...)},
	}
}
