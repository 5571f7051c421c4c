# SPDX-License-Identifier: GPL-3.0-or-later
"""Benchmark P6: the files, the baseline (numpy.loadtxt) and the table.

usage: p6.py make FOLDER        writes short.xy (13,001 rows) and long.xy (1,000,000 rows)
       p6.py loadtxt FILE N     prints one JSON line: median seconds of N reads
       p6.py table RESULTS      lines 'case program {json}' as a table of ratios
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
        began = time.perf_counter()
        table = numpy.loadtxt(path)
        seconds.append(time.perf_counter() - began)
    print(json.dumps({"seconds": statistics.median(seconds), "best": min(seconds), "points": len(table)}))


def table(path):
    times, same = {}, True
    for line in open(path):
        case, program, text = line.split(" ", 2)
        result = json.loads(text)
        times.setdefault(case, {}).setdefault(program, []).append((result["seconds"], result["best"]))
        same = same and result.get("as_strtod", True)
    print(f"{'case':12} {'loadtxt ms':>11} {'engine ms':>10} {'ratio':>6} {'range':>12} {'ratio of bests':>15}")
    for case, by in times.items():
        base, own = ([one[0] for one in by[program]] for program in ("loadtxt", "engine"))
        best, own_best = (min(one[1] for one in by[program]) for program in ("loadtxt", "engine"))
        ratios = [a / b for a, b in zip(base, own)]
        print(f"{'P6 ' + case:12} {1e3 * statistics.median(base):11.3f} {1e3 * statistics.median(own):10.3f} "
              f"{statistics.median(ratios):6.1f} {min(ratios):6.1f}-{max(ratios):<5.1f} {best / own_best:15.1f}")
    print("every number is the same as strtod's, to the bit" if same else "NUMBERS DIFFER from strtod's")
    return 0 if same else 1


if sys.argv[1] == "make":
    make(sys.argv[2])
elif sys.argv[1] == "loadtxt":
    loadtxt(sys.argv[2], int(sys.argv[3]))
else:
    sys.exit(table(sys.argv[2]))
