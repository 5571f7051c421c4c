#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Line coverage of the engine by the C programs, the specs, the demonstration and the fault checks: a table by
# floor, then the files with most untested lines. Not part of run.sh: it takes ten minutes.
#   sh tests/coverage.sh [FOLDER_FOR_BUILD]
set -u
LC_ALL=C.UTF-8
TZ=UTC
export LC_ALL TZ
root=$(cd "$(dirname "$0")/.." && pwd -P)
build=${1:-$root/build-coverage}
python=/usr/bin/python3
[ -x "$python" ] || python=python3
cd "$root" || exit 2
cmake -S "$root" -B "$build" -DCMAKE_C_COMPILER=gcc -DCMAKE_BUILD_TYPE=Debug -DCMAKE_C_FLAGS_DEBUG='-O1 -g' \
  -DLW_COVERAGE=ON -DLW_WERROR=OFF -DLW_TESTS=ON >/dev/null || exit 2
make -C "$build" -j2 --no-print-directory >"$build/make.log" 2>&1 || { tail -n 20 "$build/make.log"; exit 2; }
find "$build" -name '*.gcda' -exec rm -f {} +
ctest --test-dir "$build" --timeout 600 >"$build/ctest.log" 2>&1 || echo "some C programs failed: $build/ctest.log"
busted --lua="$build/lua-for-busted" --output=plainTerminal --pattern=_spec tests/spec tests/truth \
  >"$build/specs.log" 2>&1 || echo "some specs failed: $build/specs.log"
scratch=$(mktemp -d) && "$build/linewright" scripts/demo/kestrel.lua out="$scratch" >/dev/null 2>&1
sh tests/faults/run.sh "$build" >"$build/faults.log" 2>&1 || echo "some fault checks failed: $build/faults.log"
rm -rf "$scratch"

"$python" - "$build" <<'P'
import collections, glob, json, subprocess, sys
build = sys.argv[1]
lines = collections.defaultdict(dict)
for notes in glob.glob(build + "/**/*.gcno", recursive=True):
    if "/tests/" in notes:
        continue
    out = subprocess.run(["gcov", "-j", "-t", notes], capture_output=True).stdout.decode(errors="replace")
    for part in out.split("\n"):
        if not part.startswith("{"):
            continue
        for file in json.loads(part)["files"]:
            name = file["file"]
            if "engine/" not in name or name.endswith("api.c"):  # the embedded description of the module is text
                continue
            seen = lines["engine/" + name.rsplit("engine/", 1)[1]]
            for line in file["lines"]:  # a header or a rung is compiled more than once
                seen[line["line_number"]] = max(seen.get(line["line_number"], 0), line["count"])
total, floors = [0, 0], collections.defaultdict(lambda: [0, 0])
missing = []
for name, seen in lines.items():
    hit = sum(count > 0 for count in seen.values())
    floor = floors[name.split("/")[1]]
    floor[0] += hit
    floor[1] += len(seen)
    missing.append((len(seen) - hit, name, sorted(n for n, count in seen.items() if count == 0)))
for name in "base numeric physics scan line instrument profile sample record bind app".split():
    hit, n = floors[name]
    print(f"{name:12s}{hit:7d} of {n:6d} lines {100 * hit / max(n, 1):6.1f} %")
    if name != "app":
        total[0] += hit
        total[1] += n
print(f"below app   {total[0]:7d} of {total[1]:6d} lines {100 * total[0] / max(total[1], 1):6.1f} %")
for n, name, which in sorted(missing, reverse=True)[:25]:
    print(f"{n:5d}  {name}: {' '.join(map(str, which[:18]))}{' ...' if n > 18 else ''}")
P
