#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Kills a series with SIGKILL at random points, again and again, and looks at what is left each time: no
# half-written file, what was finished stays readable, and the run that comes to its end gives the same
# results as one that was never killed.
#   sh tests/faults/kills.sh BUILD [KILLS] [SEED]
# Last line: "N passed, N failed".
set -u
LC_ALL=C.UTF-8
export LC_ALL
root=$(cd "$(dirname "$0")/../.." && pwd -P)
engine=$(cd "$1" && pwd -P)/linewright
kills=${2:-12} seed=${3:-1}
python=/usr/bin/python3
[ -x "$python" ] || python=python3
scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-kills.XXXXXX")
child=
trap 'rm -rf "$scratch"' EXIT
trap '[ -z "$child" ] || kill "$child" 2>/dev/null; exit 130' INT TERM
cd "$scratch" || exit 1
passed=0 failed=0
check() {
  if [ $? -eq 0 ]; then
    passed=$((passed + 1))
  else
    failed=$((failed + 1))
    echo "FAILED: $1"
  fi
}
now() { date +%s.%N; }

# three powders, cut to four lines each
for time in 01 04 16; do
  awk '/^#/ || ($1 > 40 && $1 < 97)' "$root/scripts/demo/nickel_milled_${time}h.xy" >"powder_${time}h.xy"
done
"$engine" "$root/scripts/calibrate.lua" scan="$root/scripts/demo/lab6_after_service.xy" standard=lab6-660c \
  radiation="Cu Ka" out=good >/dev/null 2>err </dev/null
check "the calibration works"
series() {
  exec "$engine" "$root/scripts/milling_series.lua" scans='powder_*.xy' material=nickel \
    calibration=good/calibration.json out="$1" workers="${2:-1}"
}
# folder and workers are inputs, which a record names
plain() { sed -E '/"(date|out|workers)": /d' "$1/results.json"; }

began=$(now)
if ! (series whole) >/dev/null 2>err </dev/null; then
  echo "FAILED: the series works"
  sed 's/^/    | /' err
  echo "$passed passed, 1 failed"
  exit 1
fi
whole=$(awk -v a="$began" -v b="$(now)" 'BEGIN { print b - a }')
plain whole >reference.json
cp whole/series.csv reference.csv

# What lies in a folder is whole: records parse, pages and drawings have their ends; a journal may end in a line
# that was cut, which the next run passes over.
cat >look.py <<'P'
import json, os, sys
bad = []
for folder, _, files in os.walk(sys.argv[1]):
    for name in files:
        path = os.path.join(folder, name)
        data = open(path, "rb").read()
        if name.startswith(".lw-") and name.endswith(".part"):
            continue
        if name.endswith(".json"):
            try:
                json.loads(data)
            except ValueError as why:
                bad.append(f"{path}: {why}")
        elif name.endswith(".jsonl"):
            for line in data.split(b"\n")[:-1]:
                try:
                    json.loads(line)
                except ValueError as why:
                    bad.append(f"{path}: {why}")
        elif name.endswith((".html", ".svg")):
            if not data.rstrip().endswith((b"</html>", b"</svg>")):
                bad.append(f"{path} has no end")
        elif name.endswith(".png"):
            if not data.endswith(b"IEND\xaeB`\x82"):
                bad.append(f"{path} has no end")
        elif name.endswith(".csv"):
            if data != open("reference.csv", "rb").read():
                bad.append(f"{path} differs")
        else:
            bad.append(f"{path}: what is this?")
for line in bad:
    print(line)
sys.exit(bool(bad))
P

# Kills come at uniform times within the length of a whole run, in the same folder until a run got through; then in
# a fresh one.
done=0 round=0 early=0
while [ $done -lt "$kills" ]; do
  round=$((round + 1))
  each=0
  while [ $done -lt "$kills" ] && [ $each -lt 8 ]; do
    wait=$(awk -v seed=$((seed * 100003 + done)) -v whole="$whole" 'BEGIN { srand(seed); rand(); print rand() * whole }')
    (series "out$round" $((done % 2 + 1))) >/dev/null 2>&1 </dev/null &
    child=$!
    sleep "$wait"
    kill -KILL "$child" 2>/dev/null || early=$((early + 1)) # it had ended by itself
    wait "$child" 2>/dev/null
    child=
    "$python" look.py "out$round"
    check "all is whole after kill $done, $wait s into a run"
    if [ -e "out$round/results.json" ]; then
      plain "out$round" | cmp -s - reference.json
      check "a record that is there is right after kill $done"
    fi
    done=$((done + 1)) each=$((each + 1))
  done
  (series "out$round" 2) >/dev/null 2>err </dev/null
  check "a run after $each kills ends well"
  plain "out$round" | cmp -s - reference.json
  check "and its results are those of a run that was never killed"
  cmp -s "out$round/series.csv" reference.csv
  check "and so is its table"
done
echo "$done kills ($early came after the end), $round folders, a whole run takes $whole s"
echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
