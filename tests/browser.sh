#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# Opens every report.html under a folder in a browser without a window and without a network.
#   sh tests/browser.sh FOLDER
# A report must show its headings, keep the console silent, load nothing from outside, have links that
# lead somewhere, and draw. Status 77 with a reason on the last line where there is no browser.
set -u
LC_ALL=C.UTF-8
export LC_ALL
folder=$1
here=$(cd "$(dirname "$0")" && pwd -P)
python=/usr/bin/python3
[ -x "$python" ] || python=python3

browser=
for name in chromium chromium-browser google-chrome; do
  command -v "$name" >/dev/null 2>&1 && { browser=$name; break; }
done
[ -n "$browser" ] || { echo "no Chromium on this system"; exit 77; }

scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-browser.XXXXXX")
trap 'rm -rf "$scratch"' EXIT
trap 'exit 130' INT TERM
passed=0 failed=0
check() {
  if [ "$1" -eq 0 ]; then
    passed=$((passed + 1))
  else
    failed=$((failed + 1))
    echo "FAILED: $2"
  fi
}

# browse LOG ARGUMENT...: one visit with a profile of its own. The name of no host resolves, so a
# report that asks the network shows it on the console.
browse() {
  log_=$1
  shift
  rm -rf "$scratch/profile"
  timeout -k 5 90 "$browser" --headless --no-sandbox --disable-gpu --disable-dev-shm-usage \
    --user-data-dir="$scratch/profile" --no-first-run --no-default-browser-check --disable-extensions \
    --disable-background-networking --disable-component-update --disable-sync --disable-default-apps \
    --host-resolver-rules="MAP * ~NOTFOUND" --enable-logging=stderr --hide-scrollbars \
    --virtual-time-budget=8000 "$@" 2>"$log_"
}

# The watch on the console must see an error and a load from outside, or its silence means nothing.
cat >"$scratch/bad.html" <<'BAD'
<!doctype html><meta charset="utf-8"><title>bad</title><h1>bad</h1>
<img src="https://example.invalid/a.png" alt=""><script>nothing.here();</script>
BAD
browse "$scratch/bad.log" --dump-dom "file://$scratch/bad.html" >"$scratch/bad.dom"
grep -q 'CONSOLE.*nothing is not defined' "$scratch/bad.log"
check $? "the browser does not report a script's error, so the console check means nothing"
"$python" "$here/report.py" "$scratch/bad.html" "$scratch/bad.dom" >/dev/null 2>&1
[ $? -eq 1 ]
check $? "a report that loads from outside is not noticed"

find "$folder" -name report.html 2>/dev/null | sort >"$scratch/reports"
[ -s "$scratch/reports" ]
check $? "no report.html under $folder"
while IFS= read -r report; do
  path=$(cd "$(dirname "$report")" && pwd -P)/report.html
  short=${report#"$folder"/}
  browse "$scratch/log" --dump-dom "file://$path" >"$scratch/dom"
  check $? "$short: the browser did not finish"
  grep -E 'CONSOLE|Uncaught' "$scratch/log" >"$scratch/console"
  [ ! -s "$scratch/console" ]
  check $? "$short: the console is not silent: $(head -n 3 "$scratch/console" | cut -c1-300)"
  "$python" "$here/report.py" "$path" "$scratch/dom"
  check $? "$short: see the lines above"
  rm -f "$scratch/shot.png"
  browse "$scratch/log" --screenshot="$scratch/shot.png" --window-size=1200,2400 "file://$path" >/dev/null
  "$python" - "$scratch/shot.png" <<'PNG'
import struct, sys, zlib
# More than one colour was drawn: the picture's rows are not all alike.
data = open(sys.argv[1], "rb").read()
assert data[:8] == b"\x89PNG\r\n\x1a\n", "not a PNG"
width, height = struct.unpack(">II", data[16:24])
assert (width, height) == (1200, 2400), f"{width} x {height}"
at, body = 8, b""
while at < len(data):
    size, kind = struct.unpack(">I4s", data[at:at + 8])
    if kind == b"IDAT":
        body += data[at + 8:at + 8 + size]
    at += 12 + size
raw = zlib.decompress(body)
row = len(raw) // height
assert len({raw[i * row:(i + 1) * row] for i in range(height)}) > 50, "an empty page"
PNG
  check $? "$short: the screenshot is empty or of the wrong size"
done <"$scratch/reports"

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
