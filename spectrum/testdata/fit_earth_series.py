#!/usr/bin/env python3
"""Fits the trigonometric series of the Earth's barycentric velocity that barycenter.go carries.

The data are velocities from the routine epv00 of ERFA (pyerfa 2.0.0.1): barycentric, axes of the ICRS,
16,000 dates over 1950-2100. The model is a sum of  (c cos A + s sin A) t^m  for each axis, where A is a
whole-number combination of the mean longitudes of the planets and the lunar arguments D, l and F of
Simon et al. 1994 (A&A 282, 663) in the linear form of the IERS Conventions (2003), chapter 5, and t is in
Julian centuries from J2000. Terms are chosen one after another by the amplitude that they take out of
what is left. Run it to print the table; the last line says what the rounded table leaves.

usage: fit_earth_series.py [number of terms] [vectors.csv]
"""
import sys

import erfa
import numpy as np

TERMS = int(sys.argv[1]) if len(sys.argv) > 1 else 54
JD_FIRST, JD_LAST, N = 2433282.5, 2488069.5, 16000
AU_M, DAY_S = 149597870700.0, 86400.0
ARGS = {  # radians, radians per Julian century
    "venus": (3.176146697, 1021.3285546211),
    "earth": (1.753470314, 628.3075849991),
    "mars": (6.203480913, 334.0612426700),
    "jupiter": (0.599546497, 52.9690962641),
    "saturn": (0.874016757, 21.3299104960),
    "uranus": (5.481293872, 7.4781598567),
    "neptune": (5.311886287, 3.8133035638),
    "D": tuple(np.radians(np.array([1072260.70369, 1602961601.2090]) / 3600)),
    "l": tuple(np.radians(np.array([485868.249036, 1717915923.2178]) / 3600)),
    "F": tuple(np.radians(np.array([335779.526232, 1739527262.8478]) / 3600)),
}
NAMES = list(ARGS)
PHASE = np.array([ARGS[n][0] for n in NAMES])
RATE = np.array([ARGS[n][1] for n in NAMES])


def velocity(jd):
    _, pvb = erfa.epv00(2400000.5, jd - 2400000.5)
    return pvb["v"] * AU_M / DAY_S


def key(**k):
    return tuple(k.get(n, 0) for n in NAMES)


def candidates():
    found = set()

    def add(**k):
        v = key(**k)
        first = next((x for x in v if x), 0)
        if first:
            found.add(v if first > 0 else tuple(-x for x in v))

    for a in range(-7, 8):
        for b in range(-7, 8):
            if abs(a) + abs(b) <= 10:
                add(venus=a, earth=b)
                add(mars=a, earth=b)
    for a in range(-3, 4):
        for b in range(-5, 6):
            add(jupiter=a, earth=b)
            add(saturn=a, earth=b)
            add(jupiter=a, saturn=b)
            if abs(b) < 3:
                add(uranus=a, jupiter=b)
                for c in range(-2, 3):
                    add(jupiter=a, saturn=c, earth=b)
    for a in range(1, 4):
        add(uranus=a)
        add(neptune=a)
    for d in range(-4, 5):
        for e in range(-3, 4):
            for m in range(-2, 3):
                add(D=d, earth=e, l=m)
    for d in range(-2, 3):
        for e in (-1, 0, 1):
            for m in (-2, -1, 1, 2):
                add(D=d, earth=e, F=m)
    return sorted(found)


def main():
    rng = np.random.default_rng(1)
    jd = np.clip(np.linspace(JD_FIRST, JD_LAST, N) + rng.uniform(-1, 1, N), JD_FIRST, JD_LAST)
    v, t = velocity(jd), (jd - 2451545.0) / 36525
    chosen, columns = [(key(), 0)], [np.ones(N)]

    def phase(k):
        return np.dot(k, PHASE) + np.dot(k, RATE) * t

    def push(k, m):
        chosen.append((k, m))
        columns.extend([np.cos(phase(k)) * t**m, np.sin(phase(k)) * t**m])

    for k, m in [(key(earth=1), 0), (key(earth=1), 1), (key(earth=2), 0), (key(earth=2), 1),
                 (key(earth=3), 0), (key(jupiter=1), 0), (key(saturn=1), 0), (key(D=1, earth=1), 0),
                 (key(earth=1), 2)]:
        push(k, m)
    pool = candidates()
    while True:
        a = np.array(columns).T
        x = np.linalg.lstsq(a, v, rcond=None)[0]
        rest = v - a @ x
        if len(chosen) >= TERMS:
            break
        score = []
        for k in pool:
            c, s = np.cos(phase(k)), np.sin(phase(k))
            for m in (0, 1) if (k, 0) in chosen else (0,):
                if (k, m) not in chosen:
                    w = t**m / np.sqrt((t ** (2 * m)).mean())
                    amp = np.hypot(rest.T @ (c * w), rest.T @ (s * w)) / N * 2
                    score.append((np.sqrt((amp**2).sum()), k, m))
        score.sort(reverse=True)
        taken = []
        for _, k, m in score[:40]:
            if all(abs(np.dot(k, RATE) - np.dot(u, RATE)) > 8 for u in taken) and len(taken) < 4:
                push(k, m)
                taken.append(k)
    x = np.round(x, 3)
    rest = v - np.array(columns).T @ x
    print("// constant: %.3f, %.3f, %.3f" % tuple(x[0]))
    for i, (k, m) in enumerate(chosen[1:]):
        c, s = x[1 + 2 * i], x[2 + 2 * i]
        print("\t{%s, %d, %s, %s}," % (
            ", ".join(map(str, k)), m, ", ".join("%.3f" % q for q in c), ", ".join("%.3f" % q for q in s)))
    print("// rms of the vector %.3f m/s, largest component %.3f m/s" % (
        np.sqrt((rest**2).sum(1).mean()), np.abs(rest).max()))
    if len(sys.argv) > 2:
        dates = np.round(np.random.default_rng(2).uniform(JD_FIRST, JD_LAST, 60), 4)
        with open(sys.argv[2], "w") as f:
            f.write("# source: ERFA epv00 through pyerfa 2.0.0.1, barycentric velocity of the Earth, ICRS axes, m/s; dates drawn at random\n")
            f.write("jd_tt,vx,vy,vz\n")
            for d, q in zip(dates, velocity(dates)):
                f.write("%.4f,%.4f,%.4f,%.4f\n" % (d, *q))


main()
