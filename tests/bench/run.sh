#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Benchmarks: product beside baseline, interleaved in one run. Ratios are medians over the rounds of baseline over
# product, with their range; absolute times depend on the machine and on what else it does.
# usage: tests/bench/run.sh BUILD [ROUNDS] [CORE]   (BUILD: a build folder configured with -DLW_BENCH=ON)
# prints a table and writes BUILD/bench.json. Needs python3 with numpy and scipy (PYTHON names another one).
set -eu
here=$(cd "$(dirname "$0")" && pwd)
build=${1:?usage: run.sh BUILD [ROUNDS] [CORE]}
rounds=${2:-5}
core=${3:-}
python=${PYTHON:-python3}
"$python" -c 'import numpy, scipy' 2>/dev/null || python=/usr/bin/python3
pinned=""
if [ -n "$core" ]; then pinned="taskset -c $core"; fi
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
"$python" "$here/p1.py" make "$work"
round=0
while [ "$round" -lt "$rounds" ]; do
    for case in doublet four; do
        printf '%s numpy ' "$case"
        $pinned "$python" "$here/p1.py" fit "$work/$case"
        for rung in avx512 avx2 plain; do
            printf '%s %s ' "$case" "$rung"
            $pinned "$build/bench_p1" "$work/$case" 21 "$rung"
        done
    done
    round=$((round + 1))
done > "$work/results"
"$python" "$here/table.py" "$work/results" "$build/bench.json"

# P6: reading text, against numpy.loadtxt
"$python" "$here/p6.py" make "$work"
round=0
while [ "$round" -lt "$rounds" ]; do
    for case in "short 31 101" "long 3 7"; do
        set -- $case
        printf '%s loadtxt ' "$1"
        $pinned "$python" "$here/p6.py" loadtxt "$work/$1.xy" "$2"
        printf '%s engine ' "$1"
        $pinned "$build/bench_p6" "$work/$1.xy" "$3"
    done
    round=$((round + 1))
done > "$work/results6"
"$python" "$here/p6.py" table "$work/results6"
