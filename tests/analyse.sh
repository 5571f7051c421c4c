#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Static analysis of the engine: gcc -fanalyzer and clang-tidy with the list in .clang-tidy. Not part of run.sh: both
# take minutes, and what they find is for a person to judge. What is known to be a false alarm stands in
# tests/analyse.known, a line each: FILE CHECK, with the reason behind a '#'.
#   sh tests/analyse.sh [FOLDER_FOR_BUILD]
# Last line: "N findings, N known".
set -u
LC_ALL=C.UTF-8
export LC_ALL
root=$(cd "$(dirname "$0")/.." && pwd -P)
build=${1:-$root/build-analyse}
known=$root/tests/analyse.known
cd "$root" || exit 2
cmake -S "$root" -B "$build" -DCMAKE_C_COMPILER=gcc -DCMAKE_BUILD_TYPE=Debug -DCMAKE_EXPORT_COMPILE_COMMANDS=ON \
  -DLW_TESTS=OFF >/dev/null || exit 2
sources=$(grep -o '"file": "[^"]*"' "$build/compile_commands.json" | cut -d'"' -f4 | grep "^$root/engine/" | sort -u)
: >"$build/findings"

# the compiler's own analysis needs some optimisation, and the flags of each file
for source in $sources; do
  command=$(grep -B1 -F "\"file\": \"$source\"" "$build/compile_commands.json" | sed -n 's/.*"command": "\(.*\)",$/\1/p' |
    sed -e 's/\\"/"/g' -e 's/ -o [^ ]* / -o \/dev\/null /' | head -n 1)
  (cd "$build" && eval "$command -O1 -fanalyzer -Wno-error" 2>&1) | grep 'Wanalyzer' |
    sed -E "s|^$root/||; s|^([^:]*):[0-9]+:.*\[-W(analyzer[a-z-]*)\].*|\1 \2 &|" >>"$build/findings"
done

if command -v clang-tidy >/dev/null 2>&1; then
  for source in $sources; do
    clang-tidy -p "$build" --quiet "$source" 2>/dev/null | grep -E ' (warning|error): ' |
      sed -E "s|^$root/||; s|^([^:]*):[0-9]+:.*\[([a-zA-Z0-9.-]+)[],].*|\1 \2 &|" >>"$build/findings"
  done
else
  echo "clang-tidy is not on this system"
fi

sort -u "$build/findings" >"$build/findings.sorted"
new=0 old=0
while read -r file check rest; do
  if grep -qF "$file $check " "$known" 2>/dev/null; then
    old=$((old + 1))
  else
    new=$((new + 1))
    printf '%s\n' "$rest"
  fi
done <"$build/findings.sorted"
echo "$new findings, $old known"
[ $new -eq 0 ]
