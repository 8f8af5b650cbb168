"""Prints, as JSON, what astropy reads from one file of each layout.

usage: readback.py LAYOUT FILE [LAYOUT FILE ...]
velocity is the barycentric correction in km/s that place, time and direction in the header ask for, 0 where
the wavelengths are barycentric; arms is a list of arms, each with wave (Angstrom, as stated), flux and ivar of the first object.
Checksums are verified; wavelengths of images come from astropy.wcs.
"""
import json
import sys
import warnings

import numpy as np
from astropy import units as u
from astropy.coordinates import EarthLocation, SkyCoord
from astropy.io import fits
from astropy.time import Time
from astropy.utils import iers
from astropy.wcs import WCS

warnings.simplefilter("error", fits.verify.VerifyWarning)
warnings.filterwarnings("error", message=".*[Cc]hecksum.*")

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "ignore"


def velocity(path):
    h = fits.getheader(path)
    if h.get("SPECSYS") != "TOPOCENT":
        return 0.0
    site = EarthLocation.from_geodetic(h["OBSGEO-L"], h["OBSGEO-B"], h["OBSGEO-H"])
    start = Time(h["DATE-OBS"], scale="utc")
    middle = Time(h["MJD-AVG"], format="mjd", scale="utc")
    assert abs((middle - start).sec - h["EXPTIME"] / 2) < 1
    target = SkyCoord(h["RA"], h["DEC"], unit="deg")
    return target.radial_velocity_correction(obstime=middle, location=site).to_value(u.km / u.s)


def angstrom(values, unit):
    return (np.asarray(values, float) * u.Unit(unit, format="fits")).to_value(u.AA)


def inverse(sigma2):
    s = np.asarray(sigma2, float)
    return np.where(s > 0, 1 / np.where(s > 0, s, 1), 0)


def axis(header):
    w = WCS(header, naxis=[1])
    return (w.all_pix2world(np.arange(header["NAXIS1"]), 0)[0] * w.wcs.cunit[0]).to_value(u.AA)


def read(layout, path):
    with fits.open(path, checksum=True) as f:
        for hdu in f:
            if "BUNIT" in hdu.header:
                u.Unit(hdu.header["BUNIT"], format="fits")
        if layout == "table, a row a pixel":
            t, cols = f["SPECTRUM"].data, f["SPECTRUM"].columns
            assert cols["LOG_WAVE"].unit == "log(Angstrom)" and f["SPECTRUM"].header["SPECSYS"] == "BARYCENT"
            return [(10.0 ** t["LOG_WAVE"], t["FLUX"], t["IVAR"])]
        if layout == "vector cells, two arms":
            return [(angstrom(f[a].data["WAVELENGTH"][0], f[a].columns["WAVELENGTH"].unit), f[a].data["FLUX"][0],
                     inverse(f[a].data["SIGMA"][0].astype(float) ** 2)) for a in ("BLUE", "RED")]
        if layout == "rows of an image":
            d = f[0].data
            return [(axis(f[0].header), d[0], d[1])]
        if layout == "image, linear axis":
            assert f[0].header["SPECSYS"] == "TOPOCENT"
            return [(axis(f[0].header), f[0].data, inverse(f["ERROR"].data.astype(float) ** 2))]
        if layout == "many objects, three arms":
            assert len(f["TARGETS"].data) == len(f["BLUE_FLUX"].data)
            return [(angstrom(f[a + "_WAVELENGTH"].data, f[a + "_WAVELENGTH"].header["BUNIT"]), f[a + "_FLUX"].data[0],
                     f[a + "_IVAR"].data[0]) for a in ("BLUE", "MID", "RED")]
        if layout == "IVOA spectrum":
            t, cols = f["SPECTRUM"].data, f["SPECTRUM"].columns
            return [(angstrom(t["WAVE"], cols["WAVE"].unit), t["FLUX"], inverse(t["VARIANCE"]))]
    raise SystemExit("unknown layout " + layout)


answer = []
for layout, path in zip(sys.argv[1::2], sys.argv[2::2]):
    arms = read(layout, path)
    answer.append({"velocity": velocity(path), "arms": [{"wave": np.asarray(w, float).tolist(), "flux": np.nan_to_num(np.asarray(x, float), nan=-9e9).tolist(),
                    "ivar": np.asarray(v, float).tolist()} for w, x, v in arms]})
json.dump(answer, sys.stdout)
