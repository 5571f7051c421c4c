#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# From a bare machine to a report: installs what is missing, builds, and runs the main job on the
# demonstration data (a diffractometer before and after service, and a milling series of nickel).
#   sh scripts/start.sh
set -eu
root=$(cd "$(dirname "$0")/.." && pwd -P)
. "$root/scripts/setup.sh"

case ${1:-} in
  '') ;;
  -h | --help)
    say "usage: sh scripts/start.sh"
    say "Installs missing packages, builds Linewright in build/, analyses the demonstration data into out/demo."
    exit 0
    ;;
  *)
    warn "start.sh takes no arguments (got '$1')"
    exit 2
    ;;
esac

setup build

build=$root/build
mkdir -p "$build"
# A first build is lenient with warnings of compilers we have not met; a later one keeps its settings.
if [ -f "$build/CMakeCache.txt" ]; then
  configure "$build" >"$build/configure.log" 2>&1
else
  configure "$build" -DCMAKE_C_COMPILER=gcc -DCMAKE_BUILD_TYPE=Release -DLW_WERROR=OFF -DLW_TESTS=OFF \
    >"$build/configure.log" 2>&1
fi || { cat "$build/configure.log" >&2; exit 1; }
say "Building in $build"
make -C "$build" -j2 --no-print-directory >"$build/make.log" 2>&1 || { tail -n 60 "$build/make.log" >&2; exit 1; }

cd "$root"
say "Analysing the demonstration data"
began=$(date +%s)
"$build/linewright" scripts/demo/kestrel.lua out=out/demo
took=$(($(date +%s) - began))

say ""
reports=$(find "$root/out/demo" -name 'report.html' | sort)
if [ -z "$reports" ]; then
  warn "The job ended without a report in $root/out/demo"
  exit 1
fi
say "Done in $took s. Open in a browser:"
printf '%s\n' "$reports" | sed 's/^/  /'
