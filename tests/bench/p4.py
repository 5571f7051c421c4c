# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P4 in NumPy: the pattern that bench_p4 has laid out, value and analytic slopes, all in arrays.
usage: p4.py FOLDER REPEATS     prints one JSON line: median seconds of value and chi2, and of value and normal equations;
                                largest difference of the curve from the engine's over its maximum
Parameters: inverse size, sigma, strain, anisotropy, fall, 8 background terms, position and area of 12 lines."""
import json
import statistics
import sys
import time

import numpy as np
from scipy.special import erfc

POINTS, LINES, TERMS, SHAPES = 6000, 12, 8, 5
folder, repeats = sys.argv[1], int(sys.argv[2])
facts = np.fromfile(f"{folder}/pattern.bin")
n_lengths, step = int(facts[0]), facts[1]
n_grid = 1 << int(np.ceil(np.log2(8 * n_lengths)))
s_line, hkl_sum, kink = facts[2:2 + 3 * LINES].reshape(LINES, 3).T
start = facts[2 + 3 * LINES:]
n = start.size
instrument = np.fromfile(f"{folder}/instrument.bin").view(complex).reshape(LINES, n_lengths)
theirs = np.fromfile(f"{folder}/curve.bin")
angle = 25 + 125 * np.arange(POINTS) / POINTS
s = 2 * np.sin(np.radians(angle / 2)) / 0.15405929
basis = np.polynomial.chebyshev.chebvander(2 * (angle - angle[0]) / (angle[-1] - angle[0]) - 1, TERMS - 1).T
counts, background, weight = np.full(POINTS, 100.0), np.full(POINTS, 100.0), np.full(POINTS, 0.01)
length = step * np.arange(n_lengths)
log_length = np.log(np.maximum(length, 1e-300))
period = 1 / step


def size(p, slopes):
    """Coefficients of lognormal spheres and slopes to inverse size (area-weighted) and sigma."""
    sigma = p[1]
    median = 1.5 * np.exp(-2.5 * sigma ** 2) / p[0]
    log_t = log_length - np.log(median)
    t = np.exp(log_t)
    value, by_median, by_sigma = 0, 0, 0
    for factor, power in ((1, 3), (-1.5, 2), (0.5, 0)):
        ratio = factor * np.exp((power ** 2 - 9) * sigma ** 2 / 2) * t ** (3 - power)
        x = (log_t - power * sigma ** 2) / (sigma * np.sqrt(2))
        share = 0.5 * erfc(x)
        value = value + ratio * share
        if slopes:
            by_median = by_median - (3 - power) * ratio * share
            dx = -log_t / (sigma ** 2 * np.sqrt(2)) - power / np.sqrt(2)
            by_sigma = by_sigma + ratio * ((power ** 2 - 9) * sigma * share - np.exp(-x * x) * dx / np.sqrt(np.pi))
    return value, -by_median / p[0], by_sigma - 5 * sigma * by_median


def evaluate(p, slopes):
    a, by_inverse, by_sigma = size(p, slopes)
    square = length ** 2
    moved, area = p[SHAPES + TERMS::2], p[SHAPES + 1 + TERMS::2]
    curve = background + p[SHAPES:SHAPES + TERMS] @ basis
    columns = np.zeros((n, POINTS)) if slopes else None
    for k in range(LINES):
        s0 = s_line[k] + moved[k]
        strain, scale = 2 * np.pi ** 2 * s0 ** 2, 1 - p[3] * hkl_sum[k]
        falls = np.exp(-strain * scale * p[2] * square) * np.conj(instrument[k]) * step
        rows = [a * falls]
        if slopes:
            rows += [by_inverse * falls, by_sigma * falls, -strain * scale * square * rows[0],
                     strain * hkl_sum[k] * p[2] * square * rows[0]]
        unit = 1 / (2 * np.pi ** 2)
        tail = np.array([unit * (p[0] + kink[k]), unit, 0, 0, 0])[:len(rows), None]
        grid = np.fft.irfft(np.array(rows), n_grid, norm="forward")
        off = s - s0
        x = off * n_grid / period
        whole = np.floor(x)
        t, i = x - whole, whole.astype(int)
        inside = np.abs(off) < 0.5 * period
        y0, y1, y2, y3 = (grid[:, (i + j) % n_grid] for j in (-1, 0, 1, 2))
        c1, c2, c3 = y2 - y0 / 3 - y1 / 2 - y3 / 6, (y0 + y2) / 2 - y1, (y3 - y0) / 6 + (y1 - y2) / 2
        u = np.pi * off / period
        with np.errstate(divide="ignore", invalid="ignore"):
            others = (np.pi / period) ** 2 * np.where(np.abs(u) < 1e-2, 1 / 3 + u * u / 15,
                                                      1 / np.sin(u) ** 2 - 1 / u ** 2)
            values = np.where(inside, y1 + t * (c1 + t * (c2 + t * c3)) - tail * others, tail / off ** 2)
        curve = curve + area[k] * values[0]
        if slopes:
            columns[:4] += area[k] * values[1:]
            columns[4] -= area[k] * values[0] * (s * s - s0 * s0)
            with np.errstate(divide="ignore", invalid="ignore"):
                by_s = np.where(inside, (c1[0] + t * (2 * c2[0] + t * 3 * c3[0])) * n_grid / period,
                                -2 * tail[0] / off ** 3)
            columns[SHAPES + TERMS + 2 * k] = -area[k] * by_s
            columns[SHAPES + 1 + TERMS + 2 * k] = values[0]
    residual = counts - curve
    if not slopes:
        return curve, residual @ (weight * residual)
    columns[SHAPES:SHAPES + TERMS] = basis
    weighted = columns * weight
    return curve, residual @ (weight * residual), weighted @ columns.T, weighted @ residual


def timed(slopes):
    seconds = []
    for _ in range(repeats):
        began = time.process_time()
        found = evaluate(start, slopes)
        seconds.append(time.process_time() - began)
    return statistics.median(seconds), found


value, _ = timed(False)
both, found = timed(True)
diagonal = np.diag(found[2])
print(json.dumps({"value": value, "seconds": both, "chi2": found[1], "log_diagonal": float(np.log(diagonal).sum()),
                  "difference": float(np.abs(found[0] - theirs).max() / theirs.max())}))
