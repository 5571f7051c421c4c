#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Sets up and runs every test; the last line is "N passed, N failed, N skipped".
#   sh tests/run.sh [--lean] [--only STEP[,STEP...]] [--list]
#   --lean   leave out the tests that need heavy packages, and say which
#   --only   run just these steps (with --list: their names)
# Logs are in build/test-logs. A step counts the checks that its tools report, or as one. At most two
# jobs run at a time.
set -u
exec </dev/null
root=$(cd "$(dirname "$0")/.." && pwd -P)
. "$root/scripts/setup.sh"
LC_ALL=C.UTF-8
TZ=UTC
export LC_ALL TZ
# A user's own Lua or compiler settings must not change what is tested.
unset LUA_INIT LUA_PATH LUA_CPATH LUA_INIT_5_4 LUA_PATH_5_4 LUA_CPATH_5_4 CC CFLAGS LDFLAGS CPPFLAGS MAKEFLAGS MAKELEVEL

jobs=2
lean=no only=
steps="build ctest sanitized fuzz floors luacheck specs demo records faults browser install memory"
while [ $# -gt 0 ]; do
  case $1 in
    --lean) lean=yes ;;
    --only)
      [ $# -ge 2 ] || { warn "--only needs the names of steps: $steps"; exit 2; }
      only=$(printf '%s' "$2" | tr ',' ' ')
      for name in $only; do
        case " $steps " in *" $name "*) ;; *) warn "no step '$name'; there are: $steps"; exit 2 ;; esac
      done
      shift
      ;;
    --list) printf '%s\n' $steps; exit 0 ;;
    -h | --help) sed -n '3,8s/^# \{0,1\}//p' "$0"; exit 0 ;;
    *) warn "unknown option '$1'; usage: sh tests/run.sh [--lean] [--only STEP[,STEP...]] [--list]"; exit 2 ;;
  esac
  shift
done

build=$root/build
asan=$root/build-asan
logs=$build/test-logs
mkdir -p "$logs"
scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-test.XXXXXX")
child=
trap 'rm -rf "$scratch"' EXIT
trap '[ -z "$child" ] || kill "$child" 2>/dev/null; exit 130' INT
trap '[ -z "$child" ] || kill "$child" 2>/dev/null; exit 143' TERM
cd "$root" || exit 1

passed=0 failed=0 skipped=0
engine=$build/linewright
# Debian's own Python sees Debian's packages; another one earlier on the path may not.
python=/usr/bin/python3
[ -x "$python" ] || python=python3

# step NAME SECONDS COMMAND...: runs a step within a time limit. A function count_NAME, where `counted`
# names it, reads its log into `good`, `bad` and `left`; else the step counts as one.
step() {
  name=$1 limit=$2
  shift 2
  log=$logs/$name.log
  began=$(date +%s)
  timeout -k 10 "$limit" "$@" >"$log" 2>&1 &
  child=$!
  wait "$child"
  status=$?
  child=
  took=$(($(date +%s) - began))
  [ $status -eq 124 ] && echo "stopped after $limit s" >>"$log"
  good=0 bad=0 left=0
  case " $counted " in *" $name "*) "count_$name" ;; esac
  if [ $status -eq 77 ]; then
    left=$((left + 1))
    printf 'skipped  %-10s %s\n' "$name" "$(tail -n 1 "$log")"
  elif [ $status -ne 0 ] || [ $bad -gt 0 ]; then
    [ $bad -gt 0 ] || bad=1
    printf 'FAILED   %-10s %4d s  %d passed, %d failed  (%s)\n' "$name" $took $good $bad "${log#"$root"/}"
    tail -n 40 "$log" | cut -c1-400 | sed 's/^/    | /'
  else
    [ $good -gt 0 ] || good=1
    printf 'ok       %-10s %4d s  %d passed' "$name" $took $good
    [ $left -eq 0 ] || printf ', %d skipped' $left
    printf '\n'
  fi
  passed=$((passed + good)) failed=$((failed + bad)) skipped=$((skipped + left))
  [ $status -eq 0 ] && [ $bad -eq 0 ]
}
skip() {
  printf 'skipped  %-10s %s\n' "$1" "$2"
  skipped=$((skipped + 1))
}
wanted() { case " ${only:-$steps} " in *" $1 "*) return 0 ;; *) return 1 ;; esac; }
# part SCRIPT: runs a piece of shell with this file's settings, so that `timeout` can hold it.
part() {
  printf '%s\n' "root='$root' build='$build' asan='$asan' engine='$engine' scratch='$scratch' jobs=$jobs" \
    "python='$python' logs='$logs'" ". '$root/scripts/setup.sh'" "set -eu" "$1"
}

counted="ctest sanitized fuzz floors luacheck specs records faults browser"
count_lines() {
  good=$(sed -nE 's/^([0-9]+: )?([0-9]+) passed, ([0-9]+) failed$/\2/p' "$log" | awk '{ n += $1 } END { print n + 0 }')
  bad=$(sed -nE 's/^([0-9]+: )?([0-9]+) passed, ([0-9]+) failed$/\3/p' "$log" | awk '{ n += $1 } END { print n + 0 }')
}
# A program that dies prints no counts, so the failed programs count where they are more.
count_programs() {
  count_lines
  programs_=$(sed -nE 's/^[0-9]+% tests passed, ([0-9]+) tests? failed out of [0-9]+$/\1/p' "$log" |
    awk '{ n += $1 } END { print n + 0 }')
  [ "$programs_" -le "$bad" ] || bad=$programs_
}
count_ctest() { count_programs; }
count_sanitized() { count_programs; }
count_fuzz() { count_lines; }
count_floors() { count_lines; }
count_records() { count_lines; }
count_faults() { count_lines; }
count_browser() { count_lines; }
count_luacheck() {
  set -- $(sed -nE 's/^Total: ([0-9]+) warnings? \/ ([0-9]+) errors? in ([0-9]+) files?.*/\1 \2 \3/p' "$log")
  bad=$((${1:-0} + ${2:-0})) good=$((${3:-0} > bad ? ${3:-0} - bad : 0))
}
count_specs() {
  line_=$(grep -E '^[0-9]+ success(es)? / [0-9]+ failures? / [0-9]+ errors? / [0-9]+ pending' "$log" | tail -n 1)
  set -- $(printf '%s' "$line_" | grep -oE '[0-9]+' | head -n 4)
  good=${1:-0} bad=$((${2:-0} + ${3:-0})) left=${4:-0}
  [ "$good" -gt 0 ] || [ "$bad" -gt 0 ] || bad=1
}

setup tests >"$logs/setup.log" 2>&1 || { cat "$logs/setup.log"; echo "0 passed, 1 failed, 0 skipped"; exit 1; }
[ $lean = yes ] || setup_heavy >>"$logs/setup.log" 2>&1

# 1. gcc, warnings as errors, everything that is shipped and every C test.
built=no
if wanted build; then
  part '
    configure "$build" -DCMAKE_C_COMPILER=gcc -DCMAKE_BUILD_TYPE=Release -DLW_WERROR=ON -DLW_TESTS=ON -DLW_SANITIZE=
    make -C "$build" -j$jobs --no-print-directory
    test -x "$engine"' >"$scratch/build.sh"
  step build 900 sh "$scratch/build.sh" && built=yes
elif [ -x "$engine" ]; then
  built=yes
fi

# 2. The C programs: twins of the kernels and published values.
if wanted ctest; then
  step ctest 600 ctest --test-dir "$build" --no-tests=error -V -j $jobs --timeout 300
fi

# 3. clang with address and undefined-behaviour sanitizers: the C programs again (not those that repeat one thing many
# times for its statistics), and a recipe's road.
if wanted sanitized; then
  part '
    configure "$asan" -DCMAKE_C_COMPILER=clang -DCMAKE_BUILD_TYPE=RelWithDebInfo -DLW_WERROR=ON -DLW_TESTS=ON \
      -DLW_SANITIZE=address,undefined
    make -C "$asan" -j$jobs --no-print-directory
    export ASAN_OPTIONS=detect_leaks=1:abort_on_error=0 UBSAN_OPTIONS=print_stacktrace=1
    status=0
    ctest --test-dir "$asan" --no-tests=error -LE statistics -V -j $jobs --timeout 400 || status=1
    "$asan/linewright" scripts/calibrate.lua scan=scripts/demo/lab6_after_service.xy standard=lab6-660c \
      radiation="Cu Ka" out="$scratch/asan" && echo "1 passed, 0 failed" || { echo "0 passed, 1 failed"; status=1; }
    "$asan/linewright" scripts/size_strain.lua scan=scripts/demo/nickel_milled_04h.xy material=nickel \
      calibration="$scratch/asan/calibration.json" out="$scratch/asan-size" && echo "1 passed, 0 failed" ||
      { echo "0 passed, 1 failed"; status=1; }
    exit $status' >"$scratch/sanitized.sh"
  step sanitized 900 sh "$scratch/sanitized.sh"
fi

# 4. Made-up input for the readers, the record and the options, 20 s each.
if wanted fuzz; then
  if ! has clang; then
    skip fuzz "clang is not on this system"
  else
    part '
      configure "$root/build-fuzz" -DCMAKE_C_COMPILER=clang -DCMAKE_BUILD_TYPE=RelWithDebInfo -DLW_WERROR=ON -DLW_TESTS=ON \
        -DLW_FUZZ=ON -DLW_SANITIZE=address,undefined,fuzzer-no-link
      make -C "$root/build-fuzz" -j$jobs --no-print-directory fuzzers
      sh tests/fuzz/run.sh "$root/build-fuzz" 20' >"$scratch/fuzz.sh"
    step fuzz 900 sh "$scratch/fuzz.sh"
  fi
fi

# 5. The rules of the house.
if wanted floors; then step floors 120 sh tests/floors.sh "$build"; fi
if wanted luacheck; then
  step luacheck 120 luacheck --no-color --codes -q \
    $(find scripts standards engine/bind tests/spec tests/truth -name '*.lua' 2>/dev/null | sort)
fi

# 6. The specs, under the interpreter itself.
if wanted specs; then
  if [ $built = yes ]; then
    # a path from here: busted hands it to a shell without quotes
    step specs 900 busted --lua=build/lua-for-busted --output=plainTerminal --pattern=_spec tests/spec tests/truth
  else
    skip specs "the interpreter was not built"
  fi
fi

# 7. The main job on the demonstration data, as a person runs it; its records against their schemas.
demo=$root/out/test-demo
if wanted demo || wanted records || wanted browser; then
  if [ $built = yes ]; then
    part '
      rm -rf "$root/out/test-demo"
      "$engine" scripts/demo/kestrel.lua out=out/test-demo
      test -n "$(find "$root/out/test-demo" -name report.html)"' >"$scratch/demo.sh"
    step demo 300 sh "$scratch/demo.sh"
  else
    skip demo "the interpreter was not built"
  fi
fi
if wanted records; then step records 120 "$python" tests/records.py "$demo"; fi

# 8. What happens when the world is not as it should be.
if wanted faults; then
  if [ $built = yes ]; then
    step faults 400 sh tests/faults/run.sh "$build"
  else
    skip faults "the interpreter was not built"
  fi
fi

# 9. The reports in a browser without a window.
if wanted browser; then
  if [ $lean = yes ]; then
    skip browser "left out by --lean"
  else
    step browser 240 sh tests/browser.sh "$demo"
  fi
fi

# 10. Installed, moved and run from somewhere else.
if wanted install; then
  if [ $built = yes ]; then
    step install 240 sh tests/install.sh "$build"
  else
    skip install "the interpreter was not built"
  fi
fi

# 11. Memory of the interpreter's own start and end, which the C tests don't cross.
if wanted memory; then
  if [ $built = no ]; then
    skip memory "the interpreter was not built"
  elif has valgrind; then
    step memory 240 valgrind -q --error-exitcode=9 --leak-check=full --errors-for-leak-kinds=definite \
      "$engine" --cpu=plain -e 'local lw = require "linewright"; print(lw.standard "lab6-660c")'
  else
    skip memory "valgrind is not on this system"
  fi
fi

echo "$passed passed, $failed failed, $skipped skipped"
[ $failed -eq 0 ] && [ $passed -gt 0 ]
