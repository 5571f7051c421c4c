#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Keeps the rules of the house (DEVELOPERS.md) true:
#   includes only go down a floor; below bind nothing knows Lua, prints, ends the process, allocates
#   past the engine or keeps a writable global; every source is in its floor's list, carries its
#   licence line and stays short; every header compiles alone.
#   sh tests/floors.sh [BUILD]     with a build folder its static library is looked at too
# Prints each breach, then "N passed, N failed". Breaches that are planted first prove the rules bite.
set -u
LC_ALL=C
export LC_ALL
root=$(cd "$(dirname "$0")/.." && pwd -P)
build=${1:-}
tree=$root
scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-floors.XXXXXX")
trap 'rm -rf "$scratch"' EXIT
trap 'exit 130' INT TERM
passed=0 failed=0

floors="base numeric physics scan line instrument profile sample record bind app"
below_bind="base numeric physics scan line instrument profile sample record"

# rule NAME: reads breaches from stdin, prints them, counts the rule.
rule() {
  cat >"$scratch/breaches"
  if [ -s "$scratch/breaches" ]; then
    printf '%s:\n' "$1"
    sed 's/^/  /' "$scratch/breaches"
    failed=$((failed + 1))
  else
    passed=$((passed + 1))
  fi
}

height() {
  n_=0
  for floor_ in $floors; do
    n_=$((n_ + 1))
    [ "$floor_" = "$1" ] && { echo $n_; return; }
  done
  echo 0
}

# Prints "file: ..." for each include of a higher floor, and for each quoted include that names none.
climbing() {
  for floor in $floors; do
    [ -d "$tree/engine/$floor" ] || continue
    at=$(height "$floor")
    grep -nE '^[[:space:]]*#[[:space:]]*include[[:space:]]*"' "$tree/engine/$floor"/*.[ch] /dev/null 2>/dev/null |
      sed -E 's/^([^:]*):([0-9]+):[^"]*"([^"]*)".*/\1|\2|\3/' |
      while IFS='|' read -r file line included; do
        to=$(height "${included%%/*}")
        if [ "$to" -eq 0 ]; then
          echo "${file#"$tree"/}:$line: \"$included\" names no floor"
        elif [ "$to" -gt "$at" ]; then
          echo "${file#"$tree"/}:$line: $floor includes \"$included\" above it"
        elif [ ! -f "$tree/engine/$included" ]; then
          echo "${file#"$tree"/}:$line: \"$included\" is not there"
        fi
      done
  done
}

# code FILE: the file without comments and string contents, line numbers kept.
code() {
  gcc -fpreprocessed -dD -E -x c "$1" 2>/dev/null |
    awk '/^# [0-9]+ "/ { line = $2 - 1; next } { line++; gsub(/"([^"\\]|\\.)*"/, "\"\""); print line ":" $0 }'
}

# Uses of a pattern in the code of the floors below bind. $2: paths that may (an extended regex).
uses() {
  for floor in $below_bind; do
    for file in "$tree/engine/$floor"/*.[ch]; do
      [ -f "$file" ] || continue
      printf '%s\n' "${file#"$tree"/}" | grep -qE "$2" && continue
      code "$file" | grep -E "$1" | sed "s|^|${file#"$tree"/}:|"
    done
  done
}
knows_lua() { uses '^[0-9]+:[[:space:]]*#[[:space:]]*include[[:space:]]*[<"](lua|lauxlib|lualib)|[^A-Za-z0-9_](lua|luaL)_[A-Za-z]+[[:space:]]*\(' '^$'; }
prints_or_ends() {
  uses '[^A-Za-z0-9_](printf|vprintf|fprintf|vfprintf|puts|putchar|perror|exit|quick_exit|abort|assert|system|popen)[[:space:]]*\(|[^A-Za-z0-9_](stdout|stderr|stdin)[^A-Za-z0-9_]' '^$'
}
# A child between fork and exec may only leave by _exit; only figures start one.
leaves() { uses '[^A-Za-z0-9_]_exit[[:space:]]*\(' '^engine/record/'; }
allocates() { uses '[^A-Za-z0-9_](malloc|calloc|realloc|free|strdup|strndup|asprintf|aligned_alloc|posix_memalign)[[:space:]]*\(' '^engine/base/(engine|arena)\.c$'; }

unlisted() {
  for floor in $floors; do
    [ -d "$tree/engine/$floor" ] || continue
    for file in "$tree/engine/$floor"/*.c; do
      [ -f "$file" ] || continue
      name=${file##*/}
      list="$tree/engine/$floor/CMakeLists.txt"
      grep -qwF "$name" "$list" 2>/dev/null && continue
      # a rung: the list has NAME_${rung}.c once, and a line a rung
      rung=${name##*_}
      grep -qF "${name%_*}_\${rung}.c" "$list" 2>/dev/null && grep -q "_rung(${rung%.c}[ )]" "$list" ||
        echo "engine/$floor/$name is in no CMakeLists.txt"
    done
  done
}

sources() {
  find "$tree/engine" "$tree/scripts" "$tree/standards" "$tree/tests" "$tree/.ci" "$tree/CMakeLists.txt" \
    \( -name '*.c' -o -name '*.h' -o -name '*.lua' -o -name '*.sh' -o -name '*.py' -o -name '*.cmake' \
    -o -name CMakeLists.txt -o -path '*/.ci/run' \) -type f 2>/dev/null | sort
}
# Files in tests/ that are data for a case (refused or odd input) are exempt.
unlicensed() {
  sources | grep -vE '/tests/(data|invalid)/|/tests/fuzz/[^/]*/' | while IFS= read -r file; do
    head -n 3 "$file" | grep -q 'SPDX-License-Identifier: GPL-3.0-or-later' || echo "${file#"$tree"/}: no licence line"
  done
}
long() {
  sources | grep '/engine/' | while IFS= read -r file; do
    n=$(wc -l <"$file")
    [ "$n" -le 900 ] || echo "${file#"$tree"/}: $n lines; a file holds one noun or one method"
  done
}

# Every header compiles alone, twice in a row, with the flags of the build. (*.inc.h are bodies that
# several sources share, not headers.)
lonely() {
  lua=$(pkg-config --cflags lua5.4 2>/dev/null || true)
  find "$tree/engine" -name '*.h' ! -name '*.inc.h' | sort | while IFS= read -r file; do
    included=${file#"$tree"/engine/}
    case $included in bind/* | app/*) extra=$lua ;; *) extra= ;; esac
    printf '#include "%s"\n#include "%s"\nextern int lw_no_empty_unit;\n' "$included" "$included" |
      gcc -std=c17 -D_POSIX_C_SOURCE=200809L -Wall -Wextra -Wconversion -Werror -fsyntax-only -I"$tree/engine" $extra \
        -x c - 2>"$scratch/headers" || { echo "engine/$included:"; sed -n 1,4p "$scratch/headers"; }
  done
}

# Each rule must catch a breach that is planted in a tree of its own.
mkdir -p "$scratch/tree/engine/base" "$scratch/tree/engine/scan" "$scratch/tree/engine/record"
cat >"$scratch/tree/engine/base/bad.c" <<'BAD'
#include "scan/bad.h"
#include <lua.h>
/* exit(1) in a comment is no breach */
static const char *const fine = "printf(\"no breach\")";
void bad(void) { printf("%s", fine); _exit(1); malloc(1); }
BAD
printf 'size_t lonely(void);\n' >"$scratch/tree/engine/scan/bad.h"
: >"$scratch/tree/engine/base/CMakeLists.txt"
awk 'BEGIN { for (i = 0; i < 1000; i++) print "" }' >"$scratch/tree/engine/record/long.c"
tree=$scratch/tree
for check in climbing knows_lua prints_or_ends leaves allocates unlisted unlicensed long lonely; do
  if [ -n "$($check)" ]; then
    passed=$((passed + 1))
  else
    echo "the rule '$check' does not see a planted breach"
    failed=$((failed + 1))
  fi
done
[ "$(prints_or_ends | wc -l)" -eq 1 ] || { echo "comments or strings count as code"; failed=$((failed + 1)); }
tree=$root

# Pipes run their last part in a subshell, so each rule gets its breaches through a file.
for pair in "climbing|Includes go down only" \
  "knows_lua|Below bind nothing knows Lua" \
  "prints_or_ends|Below bind nothing prints or ends the process" \
  "leaves|Only a plotting child leaves by _exit" \
  "allocates|Memory below bind goes through the engine" \
  "unlisted|Every source is listed" \
  "unlicensed|Every source carries its licence line" \
  "long|Files stay short" \
  "lonely|Every header compiles alone"; do
  "${pair%%|*}" >"$scratch/found"
  rule "${pair#*|}" <"$scratch/found"
done

# What the compiler made of it: no writable data, no Lua, no printing in the engine's library.
library=$build/liblinewright_engine.a
if [ -n "$build" ] && [ -f "$library" ]; then
  objdump -t "$library" 2>/dev/null |
    awk '/file format/ { object = $1 } / \.(t?data|t?bss)(\.[^ ]*)?\t/ && !/\.data\.rel\.ro/ && $NF !~ /^\./ { print object " " $NF }' \
      >"$scratch/found"
  rule "The engine keeps no writable globals" <"$scratch/found"
  nm -u "$library" 2>/dev/null |
    grep -E ' (lua_|luaL_|exit$|abort$|__assert_fail$|printf$|__printf_chk$|puts$|putchar$|perror$|stdout$|stderr$|system$|popen$)' \
      >"$scratch/found"
  rule "The engine's library calls neither Lua nor the terminal" <"$scratch/found"
fi

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
