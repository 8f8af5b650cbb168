"""Writes files of every layout and type with astropy into a folder, spectra of 96
pixels or as many as the second argument says, and what
astropy reads back from them to standard output: a line of name, options and
number of segments, then for every segment of the first spectra the wavelengths
in Angstrom (as on the axis: air or vacuum), fluxes and inverse variances, each as
a count and doubles. The spectra are invented.
"""
import os
import struct
import sys
import warnings

import numpy as np
from astropy.io import fits
from astropy.wcs import WCS

warnings.simplefilter("ignore")
folder = sys.argv[1]
rng = np.random.default_rng(20310314)
N = int(sys.argv[2]) if len(sys.argv) > 2 else 96
out = sys.stdout.buffer
names = []


def write(name, hdus):
    path = os.path.join(folder, name)
    fits.HDUList(hdus).writeto(path, overwrite=True)
    return path


def put(a):
    a = np.asarray(a, dtype=">f8").ravel()
    out.write(struct.pack(">q", a.size))
    out.write(a.tobytes())


def tell(name, spectra):
    """spectra: per spectrum a list of (wave, flux, ivar or None) a segment."""
    names.append(name)
    out.write(struct.pack(">q", len(name)) + name.encode())
    out.write(struct.pack(">q", len(spectra)))
    for segments in spectra:
        out.write(struct.pack(">q", len(segments)))
        for wave, flux, ivar in segments:
            wave, flux = np.asarray(wave, "f8"), np.asarray(flux, "f8")
            k = np.argsort(wave, kind="stable")
            put(wave[k])
            put(flux[k])
            put([] if ivar is None else np.asarray(ivar, "f8")[k])


def flux(n=N, level=200.0, sigma=8.0):
    return level + sigma * rng.standard_normal(n)


def column(name, form, array, **more):
    return fits.Column(name=name, format=form, array=array, **more)


def pixel_table(name, wave_col, flux_col, extra=(), to_wave=lambda w: w, ivar=None, read=True, head=(), primary=()):
    t = fits.BinTableHDU.from_columns([wave_col, flux_col, *extra])
    for k, v in head:
        t.header[k] = v
    p = fits.PrimaryHDU()
    for k, v in primary:
        p.header[k] = v
    path = write(name, [p, t])
    with fits.open(path, memmap=False) as h:
        d = h[1].data
        iv = None if ivar is None else ivar(d)
        tell(name, [[(to_wave(np.asarray(d[wave_col.name], "f8")), d[flux_col.name], iv)]])


w = 4000 + 1.25 * np.arange(N)
wcol = lambda: column("WAVE", "D", w, unit="Angstrom")
sigma = lambda c: (lambda d: 1 / np.asarray(d[c], "f8") ** 2)
err = np.full(N, 8.0) + 0.01 * np.arange(N)

# Types of table columns.
pixel_table("type_d.fits", wcol(), column("FLUX", "D", flux()), [column("ERR", "E", err)], ivar=sigma("ERR"))
pixel_table("type_e.fits", column("WAVE", "E", w, unit="Angstrom"), column("FLUX", "E", flux()), [column("ERR", "E", err)], ivar=sigma("ERR"))
for code, dtype in (("I", "i2"), ("J", "i4"), ("K", "i8"), ("B", "u1")):
    pixel_table(f"type_{code.lower()}.fits", wcol(), column("FLUX", code, np.clip(np.rint(flux(level=120)), 0, 255).astype(dtype)))
for code, zero, dtype in (("I", 2**15, "u2"), ("J", 2**31, "u4"), ("K", 2**63, "u8")):
    pixel_table(f"unsigned_{code.lower()}.fits", wcol(), column("FLUX", code, np.rint(flux(level=40000)).astype(dtype), bzero=zero))
pixel_table("signed_byte.fits", wcol(), column("FLUX", "B", np.rint(flux(level=128, sigma=20)).astype("u1")), head=[("TZERO2", -128.0)])
pixel_table("scaled.fits", wcol(), column("FLUX", "I", np.rint(flux()).astype("i2")), head=[("TSCAL2", 0.01), ("TZERO2", 150.0)])
nulls = np.rint(flux()).astype("i2")
nulls[40:44] = -99
t = fits.BinTableHDU.from_columns([wcol(), column("FLUX", "I", nulls, null=-99)])
path = write("null.fits", [fits.PrimaryHDU(), t])
with fits.open(path) as h:
    f = np.asarray(h[1].data["FLUX"], "f8")
    f[f == -99] = np.nan
    tell("null.fits", [[(h[1].data["WAVE"], f, None)]])

# Weights and masks.
pixel_table("variance.fits", wcol(), column("FLUX", "E", flux()), [column("VARIANCE", "E", err**2)], ivar=lambda d: 1 / np.asarray(d["VARIANCE"], "f8"))
pixel_table("ivar.fits", wcol(), column("FLUX", "E", flux()), [column("IVAR", "E", err**-2.0)], ivar=lambda d: d["IVAR"])
bad = np.zeros(N, bool)
bad[30:33] = True
spoil = lambda d, m: np.where(m, 0, 1 / np.asarray(d["ERR"], "f8") ** 2)
pixel_table("mask_logical.fits", wcol(), column("FLUX", "E", flux()), [column("ERR", "E", err), column("GOOD", "L", ~bad)], ivar=lambda d: spoil(d, ~d["GOOD"]))
bits = np.zeros((N, 8), bool)
bits[30:33, 2] = True
pixel_table("mask_bits.fits", wcol(), column("FLUX", "E", flux()), [column("ERR", "E", err), column("QUALITY", "8X", bits)],
            ivar=lambda d: spoil(d, d["QUALITY"].any(axis=1)))
pixel_table("mask_int.fits", wcol(), column("FLUX", "E", flux()), [column("ERR", "E", err), column("QUALITY", "J", 4 * bad)], ivar=lambda d: spoil(d, d["QUALITY"] != 0))

# Wavelength columns of other units and scales.
for name, form, array, unit, to in (
    ("loglam", "D", np.log10(w), "", lambda x: 10**x),
    ("lnwave", "D", np.log(w), "", np.exp),
    ("wavelength", "D", w / 10, "nm", lambda x: x * 10),
    ("lambda", "D", w / 1e4, "um", lambda x: x * 1e4),
    ("FREQ", "D", 299792.458 / w * 1e13, "Hz", lambda x: 2.99792458e18 / x),
    ("ENERGY", "D", 6.62607015e-34 * 299792458.0 / 1.602176634e-19 / w * 1e10, "eV", lambda x: 6.62607015e-34 * 299792458.0 / 1.602176634e-19 / x * 1e10),
    ("WAVENUMBER", "D", 1e8 / w, "cm-1", lambda x: 1e8 / x),
):
    pixel_table(f"column_{name.lower()}.fits", column(name, form, array, unit=unit or None), column("flux", "E", flux()), to_wave=to)

# The IVOA data model: names that say nothing, roles by utype or UCD.
pixel_table("ivoa_utype.fits", column("C1", "D", w, unit="Angstrom"), column("C2", "E", flux()), [column("C3", "E", err)], ivar=sigma("C3"),
            head=[("TUTYP1", "Spectrum.Data.SpectralAxis.Value"), ("TUTYP2", "spec:Spectrum.Data.FluxAxis.Value"),
                  ("TUTYP3", "Spectrum.Data.FluxAxis.Accuracy.StatError"), ("VOCLASS", "SPECTRUM V1.2")])
pixel_table("ivoa_ucd.fits", column("X", "D", w / 10, unit="nm"), column("Y", "E", flux()), [column("Z", "E", err)], ivar=sigma("Z"), to_wave=lambda x: 10 * x,
            head=[("TUCD1", "em.wl;obs.atmos"), ("TUCD2", "phot.flux.density;em.wl"), ("TUCD3", "stat.error;phot.flux.density;em.wl"), ("VOCLASS", "SPECTRUM V1.1")])
cells = [column("A", f"{N}D", [w], unit="Angstrom"), column("B", f"{N}E", [flux()]), column("C", f"{N}E", [err])]
t = fits.BinTableHDU.from_columns(cells)
t.header["TUTYP1"], t.header["TUTYP2"], t.header["TUTYP3"] = (
    "Spectrum.Data.SpectralAxis.Value", "Spectrum.Data.FluxAxis.Value", "Spectrum.Data.FluxAxis.Accuracy.StatError")
path = write("ivoa_one_row.fits", [fits.PrimaryHDU(), t])
with fits.open(path) as h:
    d = h[1].data[0]
    tell("ivoa_one_row.fits", [[(d["A"], d["B"], 1 / np.asarray(d["C"], "f8") ** 2)]])


# The table that VOCLASS calls a spectrum, by names, behind one of another class; units as
# powers of ten; errors towards lower and higher flux.
def low_high(d):
    return 1 / ((np.asarray(d["C4"], "f8") + np.asarray(d["C3"], "f8")) / 2) ** 2


other = fits.BinTableHDU.from_columns([column("TIME", "D", w), column("FLUX", "E", flux())], name="LIGHTCURVE")
other.header["VOCLASS"] = "TIMESERIES 1.0"
t = fits.BinTableHDU.from_columns([wcol(), column("FLUX", "E", flux()), column("ERR", "E", err)])
t.header["VOCLASS"] = "SPECTRUM 1.00"
path = write("ivoa_class.fits", [fits.PrimaryHDU(), other, t])
with fits.open(path) as h:
    d = h[2].data
    tell("ivoa_class.fits", [[(d["WAVE"], d["FLUX"], 1 / np.asarray(d["ERR"], "f8") ** 2)]])
pixel_table("ivoa_low_high.fits", column("C1", "D", w / 100, unit="10**(-8) m"), column("C2", "E", flux()), [column("C3", "E", err), column("C4", "E", 1.5 * err)],
            ivar=low_high, to_wave=lambda x: 100 * x,
            head=[("TUTYP1", "spec:Spectrum.Data.SpectralAxis.Value"), ("TUTYP2", "spec:Spectrum.Data.FluxAxis.Value"),
                  ("TUTYP3", "spec:Spectrum.Data.FluxAxis.Accuracy.StatErrLow"), ("TUTYP4", "spec:Spectrum.Data.FluxAxis.Accuracy.StatErrHigh")])

# The axis of the arrays in a column, by the cards of a table (FITS standard 4.0, table 22).
for name, ctype, crval, cdelt, unit, to in (("linear", "WAVE", 500.0, 0.15, "nm", lambda x: x * 1e10), ("f2w", "WAVE-F2W", 5e-7, 1.5e-10, "m", lambda x: x * 1e10),
                                            ("freq", "FREQ", 6e14, -1.5e11, "Hz", lambda x: 2.99792458e18 / x)):
    fs = np.array([flux(), flux()]).astype("f4")
    t = fits.BinTableHDU.from_columns([column("TARGETID", "J", [5, 6]), column("FLUX", f"{N}E", fs)])
    for k, v in (("1CTYP2", ctype), ("1CRVL2", crval), ("1CDLT2", cdelt), ("1CRPX2", 3.0), ("1CUNI2", unit), ("SPEC2", "BARYCENT")):
        t.header[k] = v
    path = write(f"cells_axis_{name}.fits", [fits.PrimaryHDU(), t])
    with fits.open(path) as h:
        # wcslib wants the size of the array as an image has it
        ws = WCS(h[1].header, keysel=["binary"], colsel=[2], naxis=1)
        x = ws.wcs_pix2world(np.arange(N)[:, None], 0)[:, 0]
        tell(f"cells_axis_{name}.fits", [[(to(x), h[1].data["FLUX"][i], None)] for i in range(2)])


# Arrays in cells: in the row, on the heap by 32 and 64 bits, of different lengths.
def cell_table(name, form_of, rows=3, same=True):
    n = [N if same else N - 7 * r for r in range(rows)]
    ws = [w[:k] + r for r, k in enumerate(n)]
    fs = [flux(k).astype("f4") for k in n]
    es = [err[:k].astype("f4") for k in n]

    def pack(arrays, form, dtype):
        if form_of == "":
            return np.array(arrays)
        a = np.empty(rows, dtype=object)
        for i, x in enumerate(arrays):
            a[i] = np.asarray(x, dtype)
        return a

    cols = [column("OBJECT", "8A", [f"LR {r}" for r in range(rows)])]
    for cn, arrays, code, dtype in (("WAVE", ws, "D", "f8"), ("FLUX", fs, "E", "f4"), ("ERR", es, "E", "f4")):
        form = f"{N}{code}" if form_of == "" else f"{form_of}{code}()"
        cols.append(column(cn, form, pack(arrays, form, dtype), unit="Angstrom" if cn == "WAVE" else None))
    path = write(name, [fits.PrimaryHDU(), fits.BinTableHDU.from_columns(cols)])
    with fits.open(path, memmap=False) as h:
        tell(name, [[(d["WAVE"], d["FLUX"], 1 / np.asarray(d["ERR"], "f8") ** 2)] for d in h[1].data])


cell_table("cells.fits", "")
cell_table("heap_p.fits", "P", same=False)
cell_table("heap_q.fits", "Q", same=False)

# Text tables.
t = fits.TableHDU.from_columns([
    fits.Column(name="WAVELENGTH", format="F12.4", array=w, unit="Angstrom", ascii=True),
    fits.Column(name="FLUX", format="E16.8", array=flux(), ascii=True),
    fits.Column(name="ERROR", format="D20.12", array=err, ascii=True)])
path = write("text.fits", [fits.PrimaryHDU(), t])
with fits.open(path) as h:
    d = h[1].data
    tell("text.fits", [[(d["WAVELENGTH"], d["FLUX"], 1 / np.asarray(d["ERROR"], "f8") ** 2)]])
t = fits.TableHDU.from_columns([
    fits.Column(name="WAVELENGTH", format="F12.4", array=w, unit="Angstrom", ascii=True),
    fits.Column(name="FLUX", format="I8", array=np.rint(flux()).astype(int), ascii=True)])
path = write("text_int.fits", [fits.PrimaryHDU(), t])
with fits.open(path) as h:
    tell("text_int.fits", [[(h[1].data["WAVELENGTH"], h[1].data["FLUX"], None)]])


# Images: pixel types, and spectral axes of FITS Paper III.
def axis_of(header, n, number=1):
    ws = WCS(header)
    grid = np.zeros((n, ws.naxis))
    grid[:, number - 1] = np.arange(n)
    return ws.wcs_pix2world(grid, 0)[:, number - 1]


REST = 5007e-10
C = 299792458.0
H_EV = 6.62607015e-34
TO_M = {
    "WAVE": lambda x: x, "AWAV": lambda x: x, "FREQ": lambda x: C / x, "ENER": lambda x: H_EV * C / x, "WAVN": lambda x: 1 / x,
    "VRAD": lambda x: REST / (1 - x / C), "VOPT": lambda x: REST * (1 + x / C), "ZOPT": lambda x: REST * (1 + x),
    "VELO": lambda x: REST * np.sqrt((1 + x / C) / (1 - x / C)), "BETA": lambda x: REST * np.sqrt((1 + x) / (1 - x)),
}


def spectral_image(name, ctype, crval, cdelt, cunit="", data=None, cards=(), compare=None):
    h = fits.PrimaryHDU(flux().astype("f4") if data is None else data)
    hd = h.header
    hd["CTYPE1"], hd["CRVAL1"], hd["CDELT1"], hd["CRPIX1"] = ctype, crval, cdelt, 10.5
    if cunit:
        hd["CUNIT1"] = cunit
    hd["RESTWAV"] = REST
    for k, v in cards:
        hd[k] = v
    path = write(name, [h])
    with fits.open(path) as f:
        x = axis_of(f[0].header, f[0].data.shape[-1])
        to = compare or TO_M[ctype[:4]]
        tell(name, [[(np.asarray(to(x)) * 1e10, f[0].data, None)]])


spectral_image("axis_wave.fits", "WAVE", 5000, 1.5, "Angstrom")
spectral_image("axis_wave_nm.fits", "WAVE", 500, 0.15, "nm")
spectral_image("axis_awav.fits", "AWAV", 5.0e-7, 1.5e-10)
spectral_image("axis_wave_log.fits", "WAVE-LOG", 5000, 1.5, "Angstrom")
spectral_image("axis_freq.fits", "FREQ", 6e14, -1.5e11, "Hz")
spectral_image("axis_freq_ghz.fits", "FREQ", 6e5, -150, "GHz")
spectral_image("axis_ener.fits", "ENER", 4e-19, 1e-22, "J")
spectral_image("axis_wavn.fits", "WAVN", 2e6, 500, "m-1")
spectral_image("axis_vrad.fits", "VRAD", 1e6, 5e4, "m/s")
spectral_image("axis_vopt.fits", "VOPT", 1000, 50, "km/s")
spectral_image("axis_velo.fits", "VELO", 1e6, 5e4)
spectral_image("axis_zopt.fits", "ZOPT", 0.01, 1e-4)
spectral_image("axis_beta.fits", "BETA", 0.01, 1e-4)
spectral_image("axis_wave_f2w.fits", "WAVE-F2W", 5e-7, 1.5e-10)
spectral_image("axis_freq_w2f.fits", "FREQ-W2F", 6e14, -1.5e11)
spectral_image("axis_wave_v2w.fits", "WAVE-V2W", 5e-7, 1.5e-10)
spectral_image("axis_vopt_f2w.fits", "VOPT-F2W", 1e6, 5e4)
spectral_image("axis_zopt_v2w.fits", "ZOPT-V2W", 0.01, 1e-4)

# An alternate axis, a third axis of a thin cube, an image turned on its side.
h = fits.PrimaryHDU(flux().astype("f4"))
for k, v in (("CTYPE1", "PIXEL"), ("CRVAL1", 1), ("CDELT1", 1), ("CRPIX1", 1), ("CTYPE1A", "WAVE"), ("CUNIT1A", "nm"),
             ("CRVAL1A", 510.0), ("CDELT1A", 0.2), ("CRPIX1A", 1.0)):
    h.header[k] = v
path = write("axis_alternate.fits", [h])
with fits.open(path) as f:
    x = WCS(f[0].header, key="A").wcs_pix2world(np.arange(N)[:, None], 0)[:, 0]
    tell("axis_alternate.fits", [[(x * 1e10, f[0].data, None)]])
h = fits.PrimaryHDU(flux().astype("f4").reshape(N, 1, 1))
for k, v in (("CTYPE1", "RA---TAN"), ("CTYPE2", "DEC--TAN"), ("CTYPE3", "AWAV"), ("CRVAL1", 10.0), ("CRVAL2", 20.0), ("CRVAL3", 6000.0),
             ("CDELT1", -1e-4), ("CDELT2", 1e-4), ("CDELT3", 2.0), ("CRPIX3", 1.0), ("CUNIT3", "Angstrom")):
    h.header[k] = v
path = write("axis_third.fits", [h])
with fits.open(path) as f:
    tell("axis_third.fits", [[(6000 + 2.0 * np.arange(N), f[0].data[:, 0, 0], None)]])
h = fits.PrimaryHDU(np.array([flux() for _ in range(8)]).T.astype("f4"))
for k, v in (("CTYPE2", "WAVE"), ("CRVAL2", 6000.0), ("CDELT2", 2.0), ("CRPIX2", 1.0), ("CUNIT2", "Angstrom"), ("CTYPE1", "LINEAR"), ("CRVAL1", 1), ("CDELT1", 1)):
    h.header[k] = v
path = write("axis_turned.fits", [h])
with fits.open(path) as f:
    tell("axis_turned.fits", [[(6000 + 2.0 * np.arange(N), f[0].data[:, i], None)] for i in range(8)])

# Wavelengths from a table, without and with an index.
knots = np.linspace(4000, 4700, 15) ** 1.001
index = np.linspace(1, N, 15)
h = fits.PrimaryHDU(flux().astype("f4"))
for k, v in (("CTYPE1", "WAVE-TAB"), ("CUNIT1", "Angstrom"), ("CRVAL1", 1.0), ("CDELT1", 1.0), ("CRPIX1", 1.0), ("PS1_0", "AXIS"), ("PS1_1", "COORDS"), ("PS1_2", "INDEX")):
    h.header[k] = v
t = fits.BinTableHDU.from_columns([column("COORDS", "15D", [knots], dim="(1,15)"), column("INDEX", "15D", [index])], name="AXIS")
path = write("axis_table.fits", [h, t])
with fits.open(path) as f:
    x = WCS(f[0].header, f).wcs_pix2world(np.arange(N)[:, None], 0)[:, 0]
    tell("axis_table.fits", [[(x, f[0].data, None)]])  # -TAB coordinates stay in CUNIT

# The older logarithmic conventions.
for name, cards in (("coeff.fits", (("COEFF0", 3.6), ("COEFF1", 1e-4))),
                    ("dcflag.fits", (("CRVAL1", 3.6), ("CD1_1", 1e-4), ("CRPIX1", 1), ("DC-FLAG", 1)))):
    h = fits.PrimaryHDU(flux().astype("f4"))
    for k, v in cards:
        h.header[k] = v
    path = write(name, [h])
    with fits.open(path) as f:
        tell(name, [[(10 ** (3.6 + 1e-4 * np.arange(N)), f[0].data, None)]])

# Pixel types of images.
for code, data in (("u1", np.rint(flux(level=120)).astype("u1")), ("i2", np.rint(flux()).astype("i2")), ("u2", np.rint(flux(level=50000)).astype("u2")),
                   ("i4", np.rint(flux(level=1e6)).astype("i4")), ("i8", np.rint(flux(level=1e6)).astype("i8")), ("f8", flux())):
    spectral_image(f"pixels_{code}.fits", "WAVE", 5000, 1.5, "Angstrom", data=data)
h = fits.PrimaryHDU(flux().astype("f8"))
h.header.update(CTYPE1="WAVE", CUNIT1="Angstrom", CRVAL1=5000.0, CDELT1=1.5, CRPIX1=1.0)
h.scale("int16", bscale=0.02, bzero=100.0)
h.header["BLANK"] = -32768
h.data[50:53] = -32768
path = write("pixels_scaled.fits", [h])
with fits.open(path, do_not_scale_image_data=True) as f:
    raw = np.asarray(f[0].data, "f8")  # astropy itself scales to 4 bytes
    raw[raw == -32768] = np.nan
    tell("pixels_scaled.fits", [[(5000 + 1.5 * np.arange(N), raw * 0.02 + 100.0, None)]])

# The axis in the primary header, the image in an extension that inherits it.
p = fits.PrimaryHDU()
p.header.update(CTYPE1="WAVE", CUNIT1="Angstrom", CRVAL1=5000.0, CDELT1=1.5, CRPIX1=1.0, SPECSYS="BARYCENT")
e = fits.ImageHDU(flux().astype("f4"))
e.header["INHERIT"] = True
path = write("inherit.fits", [p, e])
with fits.open(path) as f:
    tell("inherit.fits", [[(5000 + 1.5 * np.arange(N), f[1].data, None)]])


# Named images, an object a line, in three arms, plain and compressed in tiles.
def arms(name, make, rows=5, weight=True):
    hdus, told = [fits.PrimaryHDU()], [[] for _ in range(rows)]
    for arm, start in (("B", 3600.0), ("R", 5760.0), ("Z", 7520.0)):
        wave = start + 0.8 * np.arange(N)
        hdus += [fits.ImageHDU(wave, name=f"{arm}_WAVELENGTH"),
                 make(np.array([flux() for _ in range(rows)]).astype("f4"), f"{arm}_FLUX"),
                 make(np.array([err**-2.0 for _ in range(rows)]).astype("f4"), f"{arm}_IVAR")]
    path = write(name, hdus)
    with fits.open(path) as f:
        for arm in "BRZ":
            for r in range(rows):
                told[r].append((f[f"{arm}_WAVELENGTH"].data, f[f"{arm}_FLUX"].data[r], f[f"{arm}_IVAR"].data[r]))
    tell(name, told)


arms("arms.fits", lambda d, n: fits.ImageHDU(d, name=n))
for method in ("GZIP_1", "GZIP_2"):
    arms(f"arms_{method.lower()}.fits", lambda d, n: fits.CompImageHDU(d, name=n, compression_type=method, quantize_level=0))
for how, quantize in (("none", -1), ("dither1", 1), ("dither2", 2)):
    def quantized(d, n):
        d = d.copy()
        if n.endswith("FLUX"):
            d[1, 7] = 0.0
            d[2, 20:23] = np.nan
        return fits.CompImageHDU(d, name=n, compression_type="RICE_1", quantize_method=quantize, dither_seed=77, quantize_level=16)
    arms(f"arms_rice_{how}.fits", quantized)
arms("arms_gzip_dither.fits", lambda d, n: fits.CompImageHDU(d, name=n, compression_type="GZIP_2", quantize_method=1, dither_seed=9999, quantize_level=8))


def packed(name, data, **how):
    e = fits.CompImageHDU(data, **how)
    e.header.update(CTYPE1="WAVE", CUNIT1="Angstrom", CRVAL1=5000.0, CDELT1=1.5, CRPIX1=1.0)
    path = write(name, [fits.PrimaryHDU(), e])
    with fits.open(path) as f:
        n = data.shape[1]
        tell(name, [[(5000 + 1.5 * np.arange(n), f[1].data[i], None)] for i in range(data.shape[0])])


whole = lambda level, dtype, rows=8, n=N: np.array([np.rint(flux(n, level)) for _ in range(rows)]).astype(dtype)
for method in ("RICE_1", "GZIP_1", "GZIP_2"):
    packed(f"tiles_{method.lower()}_i2.fits", whole(1000, "i2"), compression_type=method)
    packed(f"tiles_{method.lower()}_u2.fits", whole(50000, "u2"), compression_type=method)
    packed(f"tiles_{method.lower()}_i4.fits", whole(1e6, "i4"), compression_type=method)
    packed(f"tiles_{method.lower()}_u1.fits", whole(120, "u1"), compression_type=method)
packed("tiles_odd.fits", whole(1000, "i4", 11, 101), compression_type="RICE_1", tile_size=(40, 3))
packed("tiles_plio.fits", whole(1000, "i2"), compression_type="PLIO_1")
level = whole(1000, "i4")
level[:, 32:64] = 1000  # a block of equal pixels
packed("tiles_level.fits", level, compression_type="RICE_1")
packed("tiles_wild.fits", rng.integers(-(2**31), 2**31 - 1, (8, N)).astype("i4"), compression_type="RICE_1")  # blocks that do not pack
packed("tiles_wild_i2.fits", rng.integers(-(2**15), 2**15 - 1, (8, N)).astype("i2"), compression_type="RICE_1")

# gzipped as a whole; long strings and HIERARCH cards beside the axis.
pixel_table("whole.fits.gz", wcol(), column("FLUX", "E", flux()), [column("ERR", "E", err)], ivar=sigma("ERR"))
pixel_table("cards.fits", wcol(), column("FLUX", "E", flux()), [column("ERR", "E", err)], ivar=sigma("ERR"),
            primary=[("LONGWORD", "Lantern Ridge " * 12), ("HIERARCH LR SPEC SETUP", "blue"), ("HIERARCH LR TEL AIRM", 1.2)])
