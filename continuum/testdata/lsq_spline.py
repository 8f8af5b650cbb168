"""Least-squares spline of scipy.interpolate, for a comparison.

Reads a JSON object with x, flux, ivar and the knots on standard input and
prints the values of the weighted least-squares cubic spline at x. scipy squares
the weights it is given.
"""
import json
import sys

import numpy as np
from scipy.interpolate import make_lsq_spline

d = json.load(sys.stdin)
x, knots = np.array(d["x"]), np.array(d["knots"])
t = np.r_[[knots[0]] * 3, knots, [knots[-1]] * 3]
spline = make_lsq_spline(x, np.array(d["flux"]), t, k=3, w=np.sqrt(np.array(d["ivar"])))
json.dump(spline(x).tolist(), sys.stdout)
