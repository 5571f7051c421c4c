#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Installs a build under a prefix, moves the prefix, and works from there: the source tree and the
# build folder must not be needed.
#   sh tests/install.sh BUILD
set -eu
root=$(cd "$(dirname "$0")/.." && pwd -P)
build=$1
scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-install.XXXXXX")
trap 'rm -rf "$scratch"' EXIT
trap 'exit 130' INT TERM

cmake --install "$build" --prefix "$scratch/first" >"$scratch/log" 2>&1 || { cat "$scratch/log"; exit 1; }
mv "$scratch/first" "$scratch/a place"
prefix="$scratch/a place"
for wanted in bin/linewright share/linewright/scripts/calibrate.lua share/linewright/scripts/size_strain.lua \
  share/linewright/scripts/milling_series.lua share/linewright/standards/reference share/linewright/standards/schema \
  share/linewright/LICENSE; do
  [ -e "$prefix/$wanted" ] || { echo "not installed: $wanted"; exit 1; }
done

mkdir "$scratch/work"
cd "$scratch/work"
cp "$root/scripts/demo/lab6_after_service.xy" "$root/scripts/demo/nickel_milled_04h.xy" .
clean="env -i PATH=/usr/bin:/bin HOME=$scratch/work LC_ALL=C.UTF-8"
scripts="$prefix/share/linewright/scripts"

$clean "$prefix/bin/linewright" --version
$clean "$prefix/bin/linewright" "$scripts/calibrate.lua" scan=lab6_after_service.xy standard=lab6-660c \
  radiation="Cu Ka" out=instrument
$clean "$prefix/bin/linewright" "$scripts/size_strain.lua" scan=nickel_milled_04h.xy material=nickel \
  calibration=instrument/calibration.json out=powder
for wanted in instrument/calibration.json instrument/report.html powder/results.json powder/report.html; do
  [ -s "$wanted" ] || { echo "not written: $wanted"; exit 1; }
done

# The same bindings, loaded into the system's own Lua.
module=$(find "$prefix/lib" -path '*/lua/5.4/linewright.so' | head -n 1)
[ -n "$module" ] || { echo "the Lua module is not installed under $prefix/lib"; exit 1; }
$clean LUA_CPATH="$(dirname "$module")/?.so" lua5.4 -e '
  local lw = require "linewright"
  assert(tostring(lw.standard "lab6-660c"):find("660c", 1, true), "the module does not find the standards")
  assert(tostring(lw.radiation "Cu Ka") ~= "")'

if grep -rIl -- "$root" "$prefix" >"$scratch/found"; then
  echo "installed files name the source tree:"
  cat "$scratch/found"
  exit 1
fi
