#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Benchmarks: every problem beside its baseline, interleaved in one run. See bench.py for what is measured and against what.
# usage: tests/bench/run.sh [BUILD [ROUNDS [CORE [ONLY]]]]
#   BUILD   build folder (default build/bench; configured with -DLW_BENCH=ON and built if need be)
#   ROUNDS  repeats of the slow pairs (default 5)    CORE  pins everything to one processor core ("" = none)
#   ONLY    parts to run, for example p5,p4 (default all; named in bench.py)
# prints a table of ratios with their goals and writes BUILD/bench.json. Needs python3 with numpy and scipy (PYTHON names
# another one), lua5.4 for the start-up, valgrind for instruction counts (left out without it).
set -eu
here=$(cd "$(dirname "$0")" && pwd)
root=$(cd "$here/../.." && pwd)
build=${1:-$root/build/bench}
rounds=${2:-5}
core=${3:-}
only=${4:-}
python=${PYTHON:-python3}
"$python" -c 'import numpy, scipy' 2>/dev/null || python=/usr/bin/python3
if [ -f "$build/CMakeCache.txt" ]; then
    cmake -S "$root" -B "$build" -DLW_BENCH=ON >/dev/null
else
    cmake -S "$root" -B "$build" -DCMAKE_BUILD_TYPE=Release -DLW_BENCH=ON -DLW_TESTS=OFF >/dev/null
fi
cmake --build "$build" --parallel 2 >"$build/bench-build.log" 2>&1 || {
    tail -n 30 "$build/bench-build.log"
    exit 1
}
export OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1
if [ -n "$core" ]; then set -- taskset -c "$core"; else set --; fi
exec "$@" "$python" "$here/bench.py" "$build" "$rounds" ${only:+"$only"}
