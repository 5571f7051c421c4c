# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P6: the files, and the baseline (numpy.loadtxt).

usage: p6.py make FOLDER        writes short.xy (13,001 rows) and long.xy (1,000,000 rows)
       p6.py loadtxt FILE N     prints one JSON line: median seconds of N reads
"""
import json
import statistics
import sys
import time


def make(folder):
    import numpy

    random = numpy.random.default_rng(61)
    for name, n, step, decimals in (("short", 13001, 0.01, 4), ("long", 1000000, 1.3e-4, 5)):
        x, y = 20 + step * numpy.arange(n), random.uniform(100, 50000, n)
        with open(f"{folder}/{name}.xy", "w") as out:
            out.writelines(f"{a:.{decimals}f} {b:.3f}\n" for a, b in zip(x, y))


def loadtxt(path, repeats):
    import numpy

    seconds = []
    for _ in range(repeats):
        began = time.process_time()
        table = numpy.loadtxt(path)
        seconds.append(time.process_time() - began)
    print(json.dumps({"seconds": statistics.median(seconds), "best": min(seconds), "points": len(table)}))


if sys.argv[1] == "make":
    make(sys.argv[2])
else:
    loadtxt(sys.argv[2], int(sys.argv[3]))
