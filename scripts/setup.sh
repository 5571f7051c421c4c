# SPDX-License-Identifier: GPL-3.0-or-later
# What Linewright needs from the system, and how to build it. Sourced by scripts/start.sh and
# tests/run.sh, which set `root` to the top folder first. On Debian and Ubuntu missing packages are
# installed; elsewhere they are named. A second run finds everything there and changes nothing.
# shellcheck shell=sh

# One word a package; a|b means that either will do, and a is the one that gets installed.
# libc6-dev and libclang-rt-dev are only recommended by the compilers, so they are named here.
build_packages="gcc libc6-dev cmake make pkg-config|pkgconf liblua5.4-dev lua5.4 libfftw3-dev
  libsymspg-dev libjansson-dev libreadline-dev zlib1g-dev gnuplot-nox|gnuplot-qt|gnuplot-x11"
test_packages="lua-busted lua-check clang libclang-rt-dev libcerf-dev libgsl-dev python3 python3-jsonschema
  python3-scipy valgrind"
heavy_packages="chromium"

say() { printf '%s\n' "$*"; }
warn() { printf '%s\n' "$*" >&2; }
has() { command -v "$1" >/dev/null 2>&1; }

# True if the package, or one of its alternatives, is installed.
package_there() {
  for alternative_ in $(printf '%s' "$1" | tr '|' ' '); do
    case $(dpkg-query -W -f='${db:Status-Status}' "$alternative_" 2>/dev/null) in
      installed) return 0 ;;
    esac
  done
  return 1
}

# Prints which of the packages are missing, one word each (the first of its alternatives).
packages_missing() {
  for package_ in "$@"; do
    package_there "$package_" || printf '%s ' "${package_%%|*}"
  done
}

# Runs a command as root: directly, or through sudo (which may ask only where there is a terminal).
as_root() {
  if [ "$(id -u)" -eq 0 ]; then
    "$@"
  elif has sudo && sudo -n true 2>/dev/null; then
    sudo -n "$@"
  elif has sudo && [ -t 0 ] && [ -t 2 ]; then
    sudo "$@"
  else
    return 126
  fi
}

# setup_debian PACKAGE...: installs what is missing. Status 1 with the line to type if it can't.
setup_debian() {
  missing_=$(packages_missing "$@")
  [ -n "$missing_" ] || return 0
  say "Installing: $missing_"
  apt_="env DEBIAN_FRONTEND=noninteractive apt-get -y -q -o DPkg::Lock::Timeout=300 -o Dpkg::Use-Pty=0"
  if [ -z "${setup_updated:-}" ]; then
    # A list that is a little old still installs; only the install itself decides.
    as_root $apt_ update || true
    setup_updated=yes
  fi
  as_root $apt_ --no-install-recommends install $missing_ && [ -z "$(packages_missing "$@")" ] && return 0
  warn "These packages are missing and could not be installed from here: $missing_"
  warn "Install them as root, then start again:"
  warn "  apt-get update && apt-get install --no-install-recommends -y $missing_"
  return 1
}

# setup_other WHAT: on a system without apt-get, names what is missing.
setup_other() {
  missing_=
  for tool_ in gcc cmake make pkg-config gnuplot; do
    has "$tool_" || missing_="$missing_ $tool_"
  done
  if has pkg-config; then
    for library_ in lua5.4 fftw3 jansson readline zlib; do
      pkg-config --exists "$library_" || missing_="$missing_ $library_(library)"
    done
  fi
  # spglib's pkg-config file is not on every system, so its header is tried instead
  if has gcc; then
    printf '#include <spglib.h>\n' | gcc -E -x c - >/dev/null 2>&1 || missing_="$missing_ spglib(library)"
  fi
  if [ "$1" = tests ]; then
    for tool_ in busted luacheck clang python3 valgrind; do
      has "$tool_" || missing_="$missing_ $tool_"
    done
  fi
  [ -n "$missing_" ] || return 0
  warn "Missing on this system:$missing_"
  warn "Install them (with headers) through your system's package manager, then start again."
  return 1
}

# setup build|tests: makes sure that everything for that purpose is there.
setup() {
  if has apt-get && has dpkg-query; then
    case $1 in
      tests) setup_debian $build_packages $test_packages ;;
      *) setup_debian $build_packages ;;
    esac
  else
    setup_other "$1"
  fi || return 1
  cmake_=$(cmake --version | sed -n '1s/[^0-9]*//p')
  case $cmake_ in
    [4-9].* | [1-9][0-9].* | 3.2[5-9]* | 3.[3-9][0-9]*) ;;
    *)
      warn "CMake $cmake_ is too old: 3.25 or newer is needed. Install a newer cmake, then start again."
      return 1
      ;;
  esac
}

# setup_heavy: the large packages that only some tests use. Where they can't be had, those tests say
# so and are skipped, so this never fails.
setup_heavy() {
  has apt-get && has dpkg-query || return 0
  for heavy_ in $heavy_packages; do
    [ -n "$(packages_missing "$heavy_")" ] || continue
    setup_debian "$heavy_" || warn "Going on without $heavy_."
  done
}

# configure FOLDER [-Doption...]: configures a build folder, starting afresh if it was made for
# another place (a moved or copied tree).
configure() {
  folder_=$1
  shift
  fresh_=
  if [ -f "$folder_/CMakeCache.txt" ] &&
    ! grep -qxF "CMAKE_HOME_DIRECTORY:INTERNAL=$root" "$folder_/CMakeCache.txt"; then
    fresh_=--fresh
  fi
  cmake $fresh_ -S "$root" -B "$folder_" -G "Unix Makefiles" "$@"
}
