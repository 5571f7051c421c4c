# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P1 in NumPy and SciPy: the inputs, and the same fit with an analytic Jacobian.
usage: p1.py make FOLDER    writes FOLDER/doublet and FOLDER/four (scan, truth, start, emission, background), and
                            FOLDER/points_N and FOLDER/lines_N for how the time grows
       p1.py fit CASE       fits CASE by normal equations in NumPy, prints one JSON line
       p1.py trf CASE       fits CASE by scipy.optimize.least_squares, method trf, prints one JSON line
The scan: 13,001 points from 20 to 150 deg, the 24 lines of LaB6 (a = 0.41568 nm) with Cu K-alpha, background of
degree 7, Poisson noise of a fixed seed; 4 x 24 + 8 parameters."""
import json
import os
import sys
import time

import numpy as np
from numpy.polynomial import chebyshev
from scipy.special import wofz

# wavelength nm, width nm, share: an ideal doublet, and four Lorentzians (energies, widths, heights of Holzer, Fritsch,
# Deutsch, Hartwig & Forster 1997, Phys. Rev. A 56, 4554)
HC = 1239.8419843320
ENERGY, WIDTH, HEIGHT = np.array([(8047.8372, 2.285, 957), (8045.3672, 3.358, 90), (8027.9935, 2.667, 334),
                                  (8026.5041, 3.571, 111)]).T
EMISSION = {
    "doublet": np.array([(0.15405929, 0, 2 / 3), (0.15444274, 0, 1 / 3)]),
    "four": np.c_[HC / ENERGY, HC / ENERGY * WIDTH / ENERGY, WIDTH * HEIGHT / np.sum(WIDTH * HEIGHT)],
}
NORMS = np.array([n for n in range(1, 28) if n not in (7, 15, 23)])
POINTS, LINES = (3251, 6501, 13001, 26001, 52001), (6, 12, 24, 48, 96)
TO_WIDTH = 2 * np.sqrt(np.log(2))


def basis(x, n):
    return chebyshev.chebvander(2 * (x - x[0]) / (x[-1] - x[0]) - 1, n - 1)


def model(x, lines, background, emission, jacobian):
    """Curve, and with `jacobian` the derivatives to position, area, Gaussian and Lorentzian FWHM of each line and to
    the background."""
    polynomials = basis(x, len(background))
    curve = polynomials @ background
    matrix = np.zeros((len(x), 4 * len(lines) + len(background))) if jacobian else None
    for k, (position, area, gauss, lorentz) in enumerate(lines):
        sine, cosine = np.sin(np.radians(position / 2)), np.cos(np.radians(position / 2))
        for wavelength, width, share in emission:
            ratio, relative = wavelength / emission[0, 0], width / emission[0, 0]
            theta = np.arcsin(ratio * sine)
            moves = ratio * cosine / np.cos(theta)
            own = np.degrees(2 * np.tan(theta)) * relative / ratio
            own_moves = relative / ratio / np.cos(theta) ** 2 * moves
            s = TO_WIDTH / gauss
            z = s * (x - np.degrees(2 * theta)) + 0.5j * s * (lorentz + own)
            w = wofz(z)
            unit = share * s / np.sqrt(np.pi)
            curve += area * unit * w.real
            if not jacobian:
                continue
            slope = 2j / np.sqrt(np.pi) - 2 * z * w
            by_lorentz = -area * unit * s / 2 * slope.imag
            column = 4 * k
            matrix[:, column] += -area * unit * s * slope.real * moves + by_lorentz * own_moves
            matrix[:, column + 1] += unit * w.real
            matrix[:, column + 2] -= area * unit / gauss * (w.real + (z * slope).real)
            matrix[:, column + 3] += by_lorentz
    if jacobian:
        matrix[:, 4 * len(lines):] = polynomials
    return curve, matrix


def write_case(place, emission, x, position, random):
    theta = np.radians(position / 2)
    strength = 3e4 * np.exp(-3 * np.sin(theta)) * (0.35 + 0.65 * random.random(len(position)))
    truth = np.c_[position, strength, np.sqrt(0.002 + 0.001 * np.tan(theta) ** 2), 0.03 / np.cos(theta)]
    background = np.array([310.0, -95, 40, -18, 11, -5, 3, -2])
    os.makedirs(place, exist_ok=True)
    counts = random.poisson(model(x, truth, background, emission, False)[0])
    start = truth * (1 + np.array([0, 0.25, 0.3, 0.3]) * random.uniform(-1, 1, truth.shape))
    start[:, 0] += random.uniform(-0.012, 0.012, len(truth))
    flat = np.zeros(len(background))
    flat[0] = np.median(counts)
    np.savetxt(os.path.join(place, "scan.txt"), np.c_[x, counts], fmt="%.6g %d")
    np.savetxt(os.path.join(place, "truth.txt"), truth, fmt="%.17g")
    np.savetxt(os.path.join(place, "level.txt"), background, fmt="%.17g")
    np.savetxt(os.path.join(place, "start.txt"), start, fmt="%.10g")
    np.savetxt(os.path.join(place, "emission.txt"), emission, fmt="%.17g")
    np.savetxt(os.path.join(place, "background.txt"), flat, fmt="%.10g")


def make(folder):
    random = np.random.default_rng(660)
    x = np.round(np.linspace(20, 150, 13001), 2)
    lab6 = np.degrees(2 * np.arcsin(0.15405929 * np.sqrt(NORMS) / (2 * 0.41568)))
    for case, emission in EMISSION.items():
        write_case(os.path.join(folder, case), emission, x, lab6, random)
    for n in POINTS:
        write_case(os.path.join(folder, f"points_{n}"), EMISSION["doublet"], np.linspace(20, 150, n), lab6, random)
    for n in LINES:
        write_case(os.path.join(folder, f"lines_{n}"), EMISSION["doublet"], x, np.linspace(24, 146, n), random)


def read(place):
    x, y = np.loadtxt(os.path.join(place, "scan.txt"), unpack=True)
    lines = np.loadtxt(os.path.join(place, "start.txt"))
    emission = np.atleast_2d(np.loadtxt(os.path.join(place, "emission.txt")))
    return x, y, lines, emission, np.loadtxt(os.path.join(place, "background.txt")), 1 / np.sqrt(np.maximum(y, 1))


def fit(place):
    x, y, lines, emission, background, root = read(place)

    def at(p):
        curve, matrix = model(x, p[:lines.size].reshape(lines.shape), p[lines.size:], emission, True)
        residual = (y - curve) * root
        matrix *= root[:, None]
        return residual @ residual, matrix.T @ matrix, matrix.T @ residual

    began = time.process_time()
    p, damping, evaluations = np.r_[lines.ravel(), background], 1e-3, 1
    chi2, square, downhill = at(p)
    while evaluations < 60:
        trial = p + np.linalg.solve(square + damping * np.diag(np.diag(square)), downhill)
        evaluations += 1
        there = at(trial)
        if there[0] > chi2:
            damping *= 10
            continue
        done = chi2 - there[0] < 1e-9 * chi2
        p, damping = trial, damping / 10
        chi2, square, downhill = there
        if done:
            break
    print(json.dumps({"program": "numpy", "seconds": time.process_time() - began, "chi2": chi2,
                      "evaluations": evaluations}))


def trf(place):
    from scipy.optimize import least_squares
    x, y, lines, emission, background, root = read(place)

    def at(p, jacobian):
        return model(x, p[:lines.size].reshape(lines.shape), p[lines.size:], emission, jacobian)

    began = time.process_time()
    found = least_squares(lambda p: (at(p, False)[0] - y) * root, np.r_[lines.ravel(), background],
                          jac=lambda p: at(p, True)[1] * root[:, None], method="trf", x_scale="jac", ftol=1e-9)
    print(json.dumps({"program": "trf", "seconds": time.process_time() - began, "chi2": 2 * found.cost,
                      "evaluations": int(found.nfev)}))


if __name__ == "__main__":
    {"make": make, "fit": fit, "trf": trf}[sys.argv[1]](sys.argv[2])
