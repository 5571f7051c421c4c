# SPDX-License-Identifier: GPL-3.0-or-later
"""Runs the benchmark programs beside their baselines and prints a table of ratios with goals.
usage: bench.py BUILD ROUNDS [ONLY]     (called by run.sh; ONLY: names of parts, p1,command,p5,p2,p3,workers,p4,p6,kernel)

A ratio is the median, over interleaved rounds, of baseline over engine; its range follows. Times inside a process are
its processor time, so that a machine busy with other things doesn't favour the shorter run; commands are timed from
spawn to exit (wall time, and processor time of the child). BUILD/bench.json receives every row and, for growth, every
time.

P1  all lines of a scan at once; baselines: normal equations in NumPy (own-ana) and SciPy trf, both analytic
P2  quotient of transforms with error propagation; baseline NumPy
P3  12 windows a scan; baseline SciPy lm, analytic; scatter of the answers over the Cramer-Rao bound
workers  a series by one process and by two; a goal only where two cores stand idle
P4  whole pattern in Fourier space, value and normal equations; baseline NumPy, analytic, the same model to rounding
P5  start-up against lua5.4
P6  reading text against numpy.loadtxt"""
import json
import math
import os
import re
import shutil
import statistics
import subprocess
import sys
import tempfile
import time

HERE = os.path.dirname(os.path.abspath(__file__))
BUILD, ROUNDS = os.path.abspath(sys.argv[1]), int(sys.argv[2])
PARTS = ("p1", "command", "p5", "p2", "p3", "workers", "p4", "p6", "kernel")
ONLY = sys.argv[3].split(",") if len(sys.argv) > 3 else PARTS
RUNGS = ("avx512", "avx2", "plain")
rows, growth = [], {}


def engine(name, *arguments):
    return [os.path.join(BUILD, f"bench_{name}"), *map(str, arguments)]


def python(name, *arguments):
    return [sys.executable, os.path.join(HERE, name), *map(str, arguments)]


def ask(command):
    """Runs a program and takes its JSON line."""
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, check=False)
    if done.returncode != 0:
        sys.exit(f"{' '.join(command)}: exit status {done.returncode}")
    return json.loads(done.stdout.strip().splitlines()[-1])


def rounds(commands, count=ROUNDS):
    """Each command once a round: {name: [answers]}."""
    answers = {name: [] for name in commands}
    for _ in range(count):
        for name, command in commands.items():
            answers[name].append(ask(command))
    return answers


def spawn(command, output):
    """Wall and processor seconds of a command, spawn to exit."""
    began = time.perf_counter()
    pid = os.posix_spawnp(command[0], command, os.environ,
                          file_actions=[(os.POSIX_SPAWN_DUP2, output.fileno(), 1)])
    _, status, usage = os.wait4(pid, 0)
    wall = time.perf_counter() - began
    if status != 0:
        sys.exit(f"{' '.join(command)}: wait status {status}")
    return wall, usage.ru_utime + usage.ru_stime


def row(problem, base, own, must=None, want=None, unit=1e3, **more):
    """Baseline and engine seconds, round by round. Goals are least ratios."""
    ratios = [a / b for a, b in zip(base, own)]
    add(problem, statistics.median(base) * unit, statistics.median(own) * unit, statistics.median(ratios),
        (min(ratios), max(ratios)), must, want, True, **more)


def add(problem, base, own, value, spread, must, want, above, **more):
    met = None if must is None else (value >= must if above else value <= must)
    better = None if want is None else (value >= want if above else value <= want)
    rows.append({"problem": problem, "baseline": base, "engine": own, "value": value, "low": spread[0],
                 "high": spread[1], "must": must, "want": want, "at_least": above, "met": met, "wanted_met": better,
                 **more})
    number = lambda x: "" if x is None else f"{x:.4g}"
    sign = ">=" if above else "<="
    goal = "" if must is None else f"{sign} {must:g}" + ("" if want is None else f" ({want:g})")
    print(f"{problem:47} {number(base):>9} {number(own):>9} {value:9.3g} {spread[0]:8.3g}-{spread[1]:<8.3g} {goal:14} "
          f"{'' if met is None else 'met' + (', wanted met' if better else '') if met else 'NOT MET'}", flush=True)


def exponent(x, y):
    x, y = [math.log(v) for v in x], [math.log(v) for v in y]
    mean_x, mean_y = statistics.mean(x), statistics.mean(y)
    return sum((a - mean_x) * (b - mean_y) for a, b in zip(x, y)) / sum((a - mean_x) ** 2 for a in x)


def seconds(answers, key="seconds"):
    return [answer[key] for answer in answers]


def p1(work):
    goals = {"doublet": ((200, 450), (500, 1200)), "four": ((150, 360), (400, 900))}
    for case, (own_ana, trf) in goals.items():
        place = os.path.join(work, case)
        found = rounds({"numpy": python("p1.py", "fit", place), "trf": python("p1.py", "trf", place),
                        **{rung: engine("p1", place, 21, rung) for rung in RUNGS}})
        for rung in RUNGS:
            facts = found[rung][-1]
            if facts["rung"] != rung:
                continue
            main = rung == RUNGS[0]
            more = {"chi2": facts["chi2"], "baseline_chi2": found["numpy"][-1]["chi2"], "evaluations": facts["evaluations"]}
            row(f"P1 {case}, {rung}, against own-ana, ms", seconds(found["numpy"]), seconds(found[rung]),
                *(own_ana if main else ()), **more)
            row(f"P1 {case}, {rung}, against SciPy trf, ms", seconds(found["trf"]), seconds(found[rung]),
                *(trf if main else ()), **more)
    place = os.path.join(work, "doublet")
    found = rounds({"plain": engine("p1", place, 21, "auto"), "soller": engine("p1", place, 11, "auto", "soller")})
    with_axial, without = seconds(found["soller"]), seconds(found["plain"])
    ratios = [a / b for a, b in zip(with_axial, without)]
    add("P1 doublet, axial divergence refined / without, ms", 1e3 * statistics.median(without),
        1e3 * statistics.median(with_axial), statistics.median(ratios), (min(ratios), max(ratios)), 6, 3, False)
    for what, sizes in (("points", (3251, 6501, 13001, 26001, 52001)), ("lines", (6, 12, 24, 48, 96))):
        found = rounds({n: engine("p1", os.path.join(work, f"{what}_{n}"), 11, "auto") for n in sizes})
        each = {n: statistics.median(a["seconds"] / a["evaluations"] for a in found[n]) for n in sizes}
        growth[what] = {n: {"seconds": statistics.median(seconds(found[n])), "evaluations": found[n][-1]["evaluations"],
                            "seconds_an_evaluation": each[n]} for n in sizes}
        by_round = [exponent(sizes, [found[n][r]["seconds"] / found[n][r]["evaluations"] for n in sizes])
                    for r in range(ROUNDS)]
        add(f"P1 growth with {what}: exponent", None, None, exponent(sizes, list(each.values())),
            (min(by_round), max(by_round)), 1.05 if what == "points" else 1, None, False)


def whole_command(work):
    scan = os.path.join(work, "doublet", "scan.txt")
    commands = {"own-ana": python("p1.py", "fit", os.path.join(work, "doublet")),
                "trf": python("p1.py", "trf", os.path.join(work, "doublet")),
                "recipe": [os.path.join(BUILD, "linewright"), os.path.join(HERE, "p1.lua"), f"scan={scan}"]}
    wall, busy = {name: [] for name in commands}, {name: [] for name in commands}
    with open(os.devnull, "w") as null:
        for _ in range(ROUNDS):
            for name, command in commands.items():
                times = [spawn(command, null) for _ in range(9 if name == "recipe" else 1)]
                wall[name].append(statistics.median(one[0] for one in times))
                busy[name].append(statistics.median(one[1] for one in times))
    more = {"wall_ms": {name: 1e3 * statistics.median(times) for name, times in wall.items()}}
    row("P1 whole command against own-ana, busy ms", busy["own-ana"], busy["recipe"], 40, 100, **more)
    row("P1 whole command against SciPy trf, busy ms", busy["trf"], busy["recipe"], 80, None, **more)


def start_up(_):
    lua = shutil.which("lua5.4")
    if lua is None:
        print("P5 left out: lua5.4 is not installed")
        return
    commands = {"lua": [lua, "-e", ""], "own": [os.path.join(BUILD, "linewright"), "-e", ""]}
    times = {name: [] for name in commands}
    with open(os.devnull, "w") as null:
        for _ in range(200):
            for name, command in commands.items():
                times[name].append(spawn(command, null))
    for at, what, goal in ((0, "wall", (1.4, 1.0)), (1, "busy", (None, None))):
        lua, own = ([one[at] for one in times[name]] for name in ("lua", "own"))
        ratios = sorted(b / a for a, b in zip(lua, own) if a > 0)
        add(f"P5 start-up over lua5.4, {what} ms", 1e3 * statistics.median(lua), 1e3 * statistics.median(own),
            statistics.median(ratios), (ratios[len(ratios) // 4], ratios[3 * len(ratios) // 4]),
            *goal, False, range="quartiles")


def p2(_):
    for n, goal, first_goal in ((1024, (7, 10), (0.5, 0.3)), (4096, (4.5, 7), (0.5, 0.3))):
        repeats = 100 if n == 1024 else 40
        found = rounds({"numpy": python("p2.py", n, repeats), "many": engine("p2", n, 4 * repeats, "many"),
                        "few": engine("p2", n, repeats, "few")}, 2 * ROUNDS)
        reference = found["numpy"][-1]
        for road in ("many", "few"):
            for key in ("sum", "noise", "start"):
                if abs(found[road][-1][key] / reference[key] - 1) > 1e-8:
                    sys.exit(f"P2: {key} of {road} is {found[road][-1][key]}, NumPy's {reference[key]}")
        row(f"P2 {n} points, planned (FFTW), us", seconds(found["numpy"]), seconds(found["many"]), *goal, unit=1e6)
        row(f"P2 {n} points, planned, against lean NumPy, us", seconds(found["numpy"], "lean"), seconds(found["many"]),
            unit=1e6)
        row(f"P2 {n} points, unplanned, us", seconds(found["numpy"]), seconds(found["few"]), unit=1e6)
        first = [1e3 * value for value in seconds(found["few"], "first")]
        add(f"P2 {n} points, first pair of a process, ms", None, statistics.median(first), statistics.median(first),
            (min(first), max(first)), *first_goal, False)


def p3(work):
    place = os.path.join(work, "p3")
    subprocess.run(python("p3.py", "make", place), check=True)
    found = rounds({"scipy": python("p3.py", "fit", place, 10), **{rung: engine("p3", place, "fit", 100, rung) for rung in RUNGS}})
    for rung, must, want in zip(RUNGS, (50, 30, 12), (90, 60, 25)):
        facts = found[rung][-1]
        if facts["rung"] == rung:
            row(f"P3 {rung}, against SciPy lm, ms a scan", seconds(found["scipy"]), seconds(found[rung]), must, want,
                scans_per_second=1 / statistics.median(seconds(found[rung])), evaluations=facts["evaluations"])
    for counts, scale in ((150, 1), (3, 0.02)):
        facts = ask(engine("p3", place, "bound", 300, scale))
        for i, what in enumerate(("position", "area", "Gaussian", "Lorentzian")):
            ratio, bias = facts["ratio"][i], facts["bias"][i]
            add(f"scatter/bound, background {counts}, {what}: |1-x|", None, ratio, abs(ratio - 1), (ratio, ratio), 0.05,
                0.03, False)
            add(f"|bias|/bound, background {counts}, {what}", None, bias, abs(bias), (bias, bias), 0.1, None, False,
                worst_line=facts["worst_bias"][i])


def idle_cores(seconds=2):
    """Cores that did nothing meanwhile, of those that there are."""
    def idle():
        with open("/proc/stat") as stat:
            return sum(int(ticks) for ticks in stat.readline().split()[4:6])
    before = idle()
    time.sleep(seconds)
    return (idle() - before) / os.sysconf("SC_CLK_TCK") / seconds


def workers(work):
    scan = os.path.join(HERE, "..", "..", "scripts", "demo", "lab6_before_service.xy")
    wall, said, idle = {1: [], 2: []}, {1: set(), 2: set()}, []
    pinned = os.sched_getaffinity(0)
    os.sched_setaffinity(0, range(os.cpu_count()))  # two workers on one core would say nothing
    for number in range(ROUNDS):
        idle.append(idle_cores())
        for count in (1, 2):
            output = os.path.join(work, f"workers-{count}")
            with open(output, "w+") as out:
                wall[count].append(spawn([os.path.join(BUILD, "linewright"), os.path.join(HERE, "workers.lua"),
                                          f"scan={scan}", f"workers={count}", f"out={output}-{number}"], out)[0])
                out.seek(0)
                said[count].add(out.read())
    os.sched_setaffinity(0, pinned)
    if len(said[1] | said[2]) != 1:
        sys.exit("workers: two give other results than one")
    free = statistics.median(idle)
    goals = (1.8, 1.95) if free >= 1.9 else (None, None)
    row(f"P3 two workers, {free:.1f} cores were idle, wall s", wall[1], wall[2], *goals, unit=1, idle_cores=idle)


def p4(work):
    place = os.path.join(work, "p4")
    os.makedirs(place)
    found = rounds({"engine": engine("p4", place, 41), "numpy": python("p4.py", place, 15),
                    **{rung: engine("p4", place, 41, rung) for rung in RUNGS[1:]}})
    facts, reference = found["engine"][-1], found["numpy"][-1]
    # each interpolates on a grid of its own, to 2e-7 of the largest line
    if reference["difference"] > 1e-6 or abs(facts["log_diagonal"] - reference["log_diagonal"]) > 1e-5:
        sys.exit(f"P4: the baseline is another model: {facts} {reference}")
    more = {"lengths": facts["lengths"], "grid": facts["grid"], "parameters": facts["parameters"]}
    row("P4 value, ms", seconds(found["numpy"], "value"), seconds(found["engine"], "value"), 8, 12, **more)
    row("P4 value and normal equations, ms", seconds(found["numpy"]), seconds(found["engine"]), 12, 25, **more)
    for rung in RUNGS[1:]:
        if found[rung][-1]["rung"] == rung != facts["rung"]:
            row(f"P4 value, {rung}, ms", seconds(found["numpy"], "value"), seconds(found[rung], "value"), None, None)
            row(f"P4 value and normal equations, {rung}, ms", seconds(found["numpy"]), seconds(found[rung]), None, None)


def p6(work):
    subprocess.run(python("p6.py", "make", work), check=True)
    for name, n, baseline, own, goal in (("short", 13001, 31, 101, (6, 12)), ("long", 1000000, 3, 7, (5, 10))):
        path = os.path.join(work, f"{name}.xy")
        found = rounds({"loadtxt": python("p6.py", "loadtxt", path, baseline), "engine": engine("p6", path, own),
                        "hash": engine("p6", path, own, "hash")})
        if not all(answer["as_strtod"] for answer in found["engine"]):
            sys.exit("P6: numbers differ from strtod's")
        row(f"P6 {n} lines (as strtod, to the bit), ms", seconds(found["loadtxt"]), seconds(found["engine"]), *goal)
        row(f"P6 {n} lines, SHA-256 of the file too, ms", seconds(found["loadtxt"]), seconds(found["hash"]))


def instructions():
    """Instructions a point of the Voigt kernel, value and derivatives."""
    if shutil.which("valgrind") is None:
        print("instruction counts left out: valgrind is not installed")
        return {}
    counts, points = {}, 4096
    for rung in RUNGS:
        for region in ("core", "middle", "far"):
            done = subprocess.run(["valgrind", "--tool=callgrind", "--callgrind-out-file=/dev/null",
                                   f"--toggle-collect=lw_voigt_sum_{rung}", *engine("voigt", rung, region, points)],
                                  capture_output=True, text=True, check=False)
            collected = re.search(r"Collected\s*:\s*(\d+)", done.stderr)
            if done.returncode != 0 or collected is None or f'"rung": "{rung}"' not in done.stdout:
                print(f"kernel, {rung}: valgrind's processor does not run it")
                break
            counts[f"{rung} {region}"] = int(collected.group(1)) / points
    print("kernel, instructions a point: " + ", ".join(f"{name} {count:.1f}" for name, count in counts.items()))
    return counts


unknown = set(ONLY) - set(PARTS)
if unknown:
    sys.exit(f"no part is called {', '.join(sorted(unknown))}; choose from {', '.join(PARTS)}")
work = tempfile.mkdtemp()
try:
    print(f"{'problem':47} {'baseline':>9} {'engine':>9} {'ratio':>9} {'range':>17} {'goal (wanted)':14}")
    if "p1" in ONLY or "command" in ONLY:
        subprocess.run(python("p1.py", "make", work), check=True)
    for part, measure in (("p1", p1), ("command", whole_command), ("p5", start_up), ("p2", p2), ("p3", p3),
                          ("workers", workers), ("p4", p4), ("p6", p6)):
        if part in ONLY:
            measure(work)
    kernel = instructions() if "kernel" in ONLY else {}
finally:
    shutil.rmtree(work)
with open(os.path.join(BUILD, "bench.json"), "w") as out:
    json.dump({"rounds": ROUNDS, "rows": rows, "growth": growth, "instructions_a_point": kernel}, out, indent=1)
missed = [r["problem"] for r in rows if r["met"] is False]
print(f"{sum(r['met'] is True for r in rows)} goals met, {len(missed)} not met" + "".join(f"\n  {p}" for p in missed))
