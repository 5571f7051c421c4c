# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P3 in SciPy: one line a window, 12 windows a scan.
usage: p3.py make FOLDER          writes true.txt, start.txt and counts.bin (200 scans, fixed seed; see p3.c)
       p3.py fit FOLDER SCANS     scipy.optimize.least_squares, method lm, analytic Jacobian; prints one JSON line
Areas are such that the Cramer-Rao bound, which is linear theory, can be reached at 3 counts of background: with areas of
300 to 900 a Gaussian width comes near 0 in some draws, and its scatter is 1.12 times the bound (position, area and
Lorentzian width stay within 1.03)."""
import json
import os
import sys
import time

import numpy as np
from scipy.optimize import least_squares
from scipy.special import wofz

POINTS, SCANS = 500, 200
WAVELENGTH, SHARE = (0.15405929, 0.15444274), (2 / 3, 1 / 3)
TO_WIDTH = 2 * np.sqrt(np.log(2))
T = np.linspace(-1, 1, POINTS)


def axis(middle):
    return middle + 0.01 * (np.arange(POINTS) - POINTS // 2)


def evaluate(x, p, jacobian):
    position, area, gauss, lorentz, level, slope = p
    curve = level + slope * T
    matrix = np.zeros((POINTS, 6)) if jacobian else None
    s = TO_WIDTH / gauss
    for wavelength, share in zip(WAVELENGTH, SHARE):
        ratio, half = wavelength / WAVELENGTH[0], np.radians(position / 2)
        theta = np.arcsin(ratio * np.sin(half))
        z = s * (x - np.degrees(2 * theta)) + 0.5j * s * lorentz
        w = wofz(z)
        unit = share * s / np.sqrt(np.pi)
        curve += area * unit * w.real
        if not jacobian:
            continue
        dw = 2j / np.sqrt(np.pi) - 2 * z * w
        matrix[:, 0] -= area * unit * s * dw.real * ratio * np.cos(half) / np.cos(theta)
        matrix[:, 1] += unit * w.real
        matrix[:, 2] -= area * unit / gauss * (w.real + (z * dw).real)
        matrix[:, 3] -= area * unit * s / 2 * dw.imag
    if jacobian:
        matrix[:, 4], matrix[:, 5] = 1, T
    return matrix if jacobian else curve


def make(folder):
    random = np.random.default_rng(1212)
    position = np.linspace(26, 138, 12) + random.uniform(-1, 1, 12)
    truth = np.c_[position, random.uniform(800, 3000, 12), random.uniform(0.05, 0.08, 12), random.uniform(0.04, 0.09, 12),
                  np.full(12, 150.0), random.uniform(-15, 15, 12)]
    start = truth * (1 + np.array([0, 0.2, 0.2, 0.2, 0.05, 0]) * random.uniform(-1, 1, truth.shape))
    start[:, 0] += random.uniform(-0.01, 0.01, 12)
    start[:, 5] = 0
    os.makedirs(folder, exist_ok=True)
    np.savetxt(os.path.join(folder, "true.txt"), truth, fmt="%.17g")
    np.savetxt(os.path.join(folder, "start.txt"), start, fmt="%.17g")
    expected = np.array([evaluate(axis(line[0]), line, False) for line in truth])
    random.poisson(expected, (SCANS,) + expected.shape).astype(float).tofile(os.path.join(folder, "counts.bin"))


def fit(folder, scans):
    truth, start = (np.loadtxt(os.path.join(folder, name)) for name in ("true.txt", "start.txt"))
    counts = np.fromfile(os.path.join(folder, "counts.bin")).reshape(SCANS, 12, POINTS)
    x = [axis(line[0]) for line in truth]
    chi2, evaluations, began = 0.0, 0, time.process_time()
    for scan in range(scans):
        for k in range(12):
            y = counts[scan, k]
            root = 1 / np.sqrt(np.maximum(y, 1))
            found = least_squares(lambda p: (evaluate(x[k], p, False) - y) * root, start[k], method="lm",
                                  jac=lambda p: evaluate(x[k], p, True) * root[:, None],
                                  x_scale=np.abs(start[k]) + 0.01)
            chi2 += 2 * found.cost
            evaluations += found.nfev
    print(json.dumps({"seconds": (time.process_time() - began) / scans, "chi2": chi2 / (12 * scans),
                      "evaluations": evaluations / (12 * scans)}))


if sys.argv[1] == "make":
    make(sys.argv[2])
else:
    fit(sys.argv[2], int(sys.argv[3]))
