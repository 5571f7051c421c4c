#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Runs every fuzz target for a while, two at a time, from its corpus on.
#   sh tests/fuzz/run.sh BUILD [SECONDS] [TARGET...]
# BUILD was configured with clang, -DLW_FUZZ=ON and -DLW_SANITIZE=address,undefined,fuzzer-no-link. What crashes
# a target is kept in BUILD/fuzz/TARGET; once mended, it belongs into tests/fuzz/corpus/TARGET.
set -u
LC_ALL=C.UTF-8
export LC_ALL
build=$(cd "${1:?usage: run.sh BUILD [SECONDS] [TARGET...]}" && pwd -P)
seconds=${2:-20}
shift
[ $# -eq 0 ] || shift
here=$(cd "$(dirname "$0")" && pwd -P)
[ $# -gt 0 ] || set -- scan_text scan_pdcif scan_gzip record literal options

mkdir -p "$build/fuzz/invalid"
for case in "$here"/../invalid/*; do # libFuzzer wants files side by side
  for file in "$case"/input*; do [ ! -f "$file" ] || cp "$file" "$build/fuzz/invalid/${case##*/}"; done
done

one() {
  name=$1 folder=$build/fuzz/$1
  mkdir -p "$folder/found"
  # the seeds: its corpus and what the tree holds of the kind anyway
  set -- "$folder/found" "$here/corpus/$name"
  case $name in
    scan_*) set -- "$@" "$build/fuzz/invalid" ;;
    literal) for kind in materials radiation reference; do set -- "$@" "$here/../../standards/$kind"; done ;;
  esac
  # a Lua state keeps what it learnt: looking for leaks after every input takes nine tenths of the time (the
  # replay under sanitizers looks at its end)
  [ "$name" != literal ] || set -- -detect_leaks=0 "$@"
  [ ! -f "$here/$name.dict" ] || set -- "-dict=$here/$name.dict" "$@"
  if "$build/tests/fuzz_$name" -max_total_time="$seconds" -timeout=10 -rss_limit_mb=2048 -max_len=16384 \
    -artifact_prefix="$folder/" -print_final_stats=1 "$@" >"$folder/log" 2>&1; then
    runs=$(sed -n 's/^stat::number_of_executed_units: *//p' "$folder/log")
    printf '%-11s %9s inputs in %s s\n1 passed, 0 failed\n' "$name" "${runs:-?}" "$seconds"
  else
    printf 'FAILED: %s\n' "$name"
    grep -E 'ERROR|runtime error|not kept|Test unit|SUMMARY' "$folder/log" | head -n 8
    printf '0 passed, 1 failed\n'
    return 1
  fi
}

status=0
while [ $# -gt 0 ]; do
  one "$1" >"$build/fuzz/first" & first=$!
  second=
  if [ $# -gt 1 ]; then
    one "$2" >"$build/fuzz/second" & second=$!
  fi
  wait $first || status=1
  cat "$build/fuzz/first"
  if [ -n "$second" ]; then
    wait $second || status=1
    cat "$build/fuzz/second"
    shift
  fi
  shift
done
exit $status
