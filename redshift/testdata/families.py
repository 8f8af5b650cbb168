"""Spectra of kinds for which no open one is at hand, from physics that knows nothing of
the templates. Prints a list of {name, z, flux} on the grid that stdin asks for; flux is
without noise and 1 in the median. Wavelengths are vacuum Angstrom.

Constants are from memory unless said otherwise.
"""
import json
import sys

import numpy as np
from scipy.linalg import eigh_tridiagonal
from scipy.ndimage import gaussian_filter1d
from scipy.special import voigt_profile

C = 299792.458  # km/s
ask = json.load(sys.stdin)
observed = 10 ** (ask["start"] + ask["step"] * np.arange(ask["n"]))
rest = 10 ** np.arange(2.9, 4.05, 2e-5)  # 14 km/s


def planck(wave, kelvin):
    return wave**-5.0 / np.expm1(1.43877e8 / (wave * kelvin))


def at_4500(flux):
    return flux / np.interp(4500.0, rest, flux)


def smooth(flux, sigma):
    """Gaussian of sigma km/s, in velocity."""
    return gaussian_filter1d(flux, sigma / (C * np.log(10) * 2e-5), mode="nearest")


def balmer(n):
    return 911.753 * 4 * n * n / (n * n - 4)  # vacuum


# --- a galaxy after a burst -------------------------------------------------------

# Air wavelengths of strong metal lines with their equivalent widths in Angstrom in K giants.
METALS = [(3933.7, 12), (3968.5, 9), (4226.7, 1.8), (4045.8, 1.0), (4063.6, 0.8), (4143.9, 0.6), (4271.8, 0.9), (4325.8, 0.9),
          (4383.5, 1.2), (4404.8, 0.7), (4457, 0.6), (4531, 0.8), (4668, 0.9), (4891, 0.6), (4920, 0.7), (4957, 0.6), (5015, 0.8), (5041, 0.5),
          (5167.3, 1.2), (5172.7, 1.6), (5183.6, 2.0), (5227, 0.6), (5270, 1.2), (5328, 1.0), (5371, 0.6), (5406, 0.7), (5455, 0.6),
          (5890.0, 1.1), (5895.9, 0.9), (6122, 0.3), (6162, 0.4), (6495, 0.5)]


def lines(table, gauss, lorentz):
    """Transmission of Voigt lines whose optical depth has the area given."""
    tau = np.zeros_like(rest)
    for wave, area in table:
        near = np.abs(rest - wave) < 400
        tau[near] += area * voigt_profile(rest[near] - wave, gauss, lorentz)
    return np.exp(-tau)


def vacuum(table):
    return [(w * 1.00028, a) for w, a in table]


def young_stars():
    """9,000 K with pressure-broadened Balmer lines, some 15 Angstrom wide, that merge
    into the Balmer continuum at 3646 Angstrom."""
    table = [(balmer(n), 24 if n > 3 else 14) for n in range(3, 9)] + [(balmer(n), 24 * (8.0 / n) ** 2.5) for n in range(9, 26)]
    jump = 1 - 0.55 / (1 + np.exp((rest - 3665) / 12))
    return planck(rest, 9000) * lines(table, 2.0, 5.0) * jump * lines(vacuum([(3933.7, 0.8)]), 0.8, 0.3)


def old_stars():
    """4,600 K with metal lines, the CH band and the MgH band."""
    band = 1 - 0.25 * ((rest > 4286) & (rest < 4315)) - 0.12 * ((rest > 5010) & (rest < 5205))
    blanket = 1 - 0.4 / (1 + np.exp((rest - 3995) / 15))
    return planck(rest, 4600) * lines(vacuum(METALS), 0.8, 0.5) * lines([(balmer(n), 1.5) for n in range(3, 8)], 0.8, 0.3) * band * blanket


def postburst(share):
    return smooth(share * at_4500(young_stars()) + (1 - share) * at_4500(old_stars()), 180)


# --- a carbon star ---------------------------------------------------------------


def levels(we, wexe, re, mass, top):
    """Vibrational wave functions of a Morse potential, solved on a grid (cm^-1, Angstrom, amu)."""
    r = np.linspace(0.8, 2.4, 1200)
    depth = we**2 / (4 * wexe)
    beta = np.sqrt(mass * wexe / 16.857629)
    h = 16.857629 / mass / (r[1] - r[0]) ** 2
    potential = depth * (1 - np.exp(-beta * (r - re))) ** 2
    _, psi = eigh_tridiagonal(potential + 2 * h, np.full(len(r) - 1, -h), select="i", select_range=(0, top))
    return psi


def system(upper, lower, mass, kelvin, top=5):
    """Opacity of a band system of vertical electronic transitions against wave number:
    P and R lines of each band with Boltzmann populations and Franck-Condon factors.
    upper and lower are Te, we, wexe, Be, alpha, re (Huber & Herzberg 1979, from memory)."""
    psi_u, psi_l = levels(*upper[1:3], upper[5], mass, top), levels(*lower[1:3], lower[5], mass, top)
    overlap = (psi_u.T @ psi_l) ** 2
    opacity = np.zeros_like(rest)
    j = np.arange(0, 140)

    def term(s, v):
        return s[0] + s[1] * (v + 0.5) - s[2] * (v + 0.5) ** 2

    for v2 in range(top + 1):
        b2 = lower[3] - lower[4] * (v2 + 0.5)
        energy = term(lower, v2) - term(lower, 0) + b2 * j * (j + 1)
        people = (2 * j + 1) * np.exp(-1.43877 * energy / kelvin)
        for v1 in range(top + 1):
            b1 = upper[3] - upper[4] * (v1 + 0.5)
            origin = term(upper, v1) - term(lower, v2)
            for step in (1, -1):
                k = j + step
                ok = (k >= 0) & (origin > 5000)
                nu = origin + b1 * k[ok] * (k[ok] + 1) - b2 * j[ok] * (j[ok] + 1)
                i = np.round((np.log10(1e8 / nu) - 2.9) / 2e-5).astype(int)
                inside = (i >= 0) & (i < len(rest))
                np.add.at(opacity, i[inside], (0.5 * overlap[v1, v2] * people[ok])[inside])
    return smooth(opacity, 60) / 1e3


def carbon(depth):
    """3,300 K behind the Swan bands of C2 and the red system of CN, sodium and barium."""
    c2 = system((20022.5, 1788.2, 16.44, 1.7527, 0.0161, 1.2661), (716.2, 1641.35, 11.67, 1.6324, 0.0166, 1.3119), 6.0, 3000)
    cn = system((9245.3, 1812.6, 12.6, 1.7151, 0.0171, 1.2333), (0.0, 2068.6, 13.09, 1.8997, 0.0174, 1.1718), 6.4622, 3000)
    c2, cn = c2 / np.max(smooth(c2, 300)), cn / np.max(smooth(cn, 300)[(rest > 6000) & (rest < 9500)])
    metal = lines(vacuum([(5890.0, 4), (5895.9, 3.5), (4554.0, 1.5), (6497, 0.8), (6563, 0.5)]), 0.6, 0.4)
    return smooth(planck(rest, 3300) * np.exp(-depth * c2 - 0.5 * depth * cn) * metal, 64)


# --- a quasar with an outflow ----------------------------------------------------


def outflow(troughs, z):
    """A power law with the lines of a quasar behind troughs of Gaussian optical depth
    in the high ions: (velocity, sigma) in km/s and depth of each. The forest below
    Lyman-alpha is that of Becker et al. (2013): 0.751 ((1+z)/4.5)^2.90 - 0.132."""
    flux = (rest / 2000) ** -1.5
    peaks = [(1215.67, 1.8, 2200), (1240.1, 0.35, 2200), (1305, 0.1, 2200), (1399, 0.2, 2600), (1546.5, 0.7, 2300), (1638, 0.08, 2500), (1664, 0.05, 2500),
             (1860, 0.06, 2500), (1906, 0.3, 2800), (2799, 0.35, 1900), (2500, 0.12, 9000), (4862.7, 0.5, 1900)]
    line = sum(h * np.exp(-0.5 * (C * np.log(rest / w) / s) ** 2) for w, h, s in peaks)
    tau = np.zeros_like(rest)
    for velocity, sigma, depth in troughs:
        for wave, strength in [(1549.1, 1.0), (1397.5, 0.5), (1240.1, 0.9), (1215.67, 0.5), (1033.8, 0.9)]:
            tau += depth * strength * np.exp(-0.5 * ((C * np.log(rest / wave) - velocity) / sigma) ** 2)
    gas = rest * (1 + z) / 1215.67
    forest = np.where(rest < 1215.67, np.exp(-np.maximum(0, 0.751 * (gas / 4.5) ** 2.90 - 0.132)), 1)
    return smooth(flux * (1 + line) * np.exp(-tau) * forest, 64)


out = []


def add(name, z, flux):
    seen = np.interp(observed, rest * (1 + z), flux)
    out.append({"name": name, "z": z, "flux": list(seen / np.median(seen))})


for z in (0.03, 0.12, 0.3, 0.55):
    add("postburst", z, postburst(0.7))
add("postburst", 0.2, postburst(0.5))
add("postburst", 0.2, postburst(0.85))
for z in (-0.0007, 0.0, 0.0006):
    add("carbon", z, carbon(4.0))
for depth in (1.0, 2.0, 8.0):
    add("carbon", 0.0002, carbon(depth))
for z in (1.9, 2.3, 2.8, 3.5):
    add("outflow", z, outflow([(-7000, 1800, 2.0)], z))
add("outflow", 2.2, outflow([(-3500, 1000, 3.0)], 2.2))
add("outflow", 2.5, outflow([(-13000, 2500, 2.0)], 2.5))
add("outflow", 2.5, outflow([(-4000, 1000, 1.5), (-10000, 2000, 1.5)], 2.5))
json.dump(out, sys.stdout)
