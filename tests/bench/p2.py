# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P2 in NumPy: the quotient of transforms with Poisson noise, as bench_p2.
usage: p2.py POINTS REPEATS     prints one JSON line: median seconds with five transforms (signal and noise apart) and
                                `lean`, with the three that suffice"""
import json
import statistics
import sys
import time

import numpy as np

BACKGROUND, BATCH = 100.0, 20


def rest(n, h, g, noise_h, noise_g):
    quarter = n // 4
    c = 1 / g[:quarter]
    f = h[:quarter] * c
    f2 = f * f
    size = c.real ** 2 + c.imag ** 2
    square = f.real ** 2 + f.imag ** 2
    both = size * (noise_h[0].real + square * noise_g[0].real)
    difference = (c * c * (noise_h[0:2 * quarter:2] + f2 * noise_g[0:2 * quarter:2])).real
    stands = square > 4 * both
    kept = quarter if stands.all() else int(np.argmin(stands))
    spectrum = np.zeros(n // 2 + 1, complex)
    spectrum[:kept] = f[:kept]
    return f, 0.5 * (both + difference), 0.5 * (both - difference), kept, np.fft.irfft(spectrum, n, norm="forward")


def five(h, g):
    return rest(len(h), np.fft.rfft(h - BACKGROUND), np.fft.rfft(g - BACKGROUND), np.fft.rfft(h), np.fft.rfft(g))


def three(h, g):
    noise_h, noise_g = np.fft.rfft(h), np.fft.rfft(g)
    signal_h, signal_g = noise_h.copy(), noise_g.copy()
    signal_h[0] -= BACKGROUND * len(h)
    signal_g[0] -= BACKGROUND * len(g)
    return rest(len(h), signal_h, signal_g, noise_h, noise_g)


def timed(what, h, g, repeats):
    seconds = []
    for _ in range(repeats):
        began = time.process_time()
        for _ in range(BATCH):
            what(h, g)
        seconds.append((time.process_time() - began) / BATCH)
    return statistics.median(seconds)


n, repeats = int(sys.argv[1]), int(sys.argv[2])
x = 0.01 * (np.arange(n) - n / 2)
h = np.floor(15000 / (1 + x * x / 0.0121) + BACKGROUND + 0.5)
g = np.floor(25000 / (1 + x * x / 0.0025) + BACKGROUND + 0.5)
f, var_re, var_im, kept, profile = five(h, g)
print(json.dumps({"seconds": timed(five, h, g, repeats), "lean": timed(three, h, g, repeats), "kept": kept,
                  "sum": float(np.abs(f[:kept]).sum()), "noise": float((var_re + var_im)[:kept].sum()),
                  "start": float(profile[0])}))
