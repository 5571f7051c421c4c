#!/bin/sh
# SPDX-License-Identifier: GPL-3.0-or-later
# What the interpreter does when the world is not as it should be: exit status, a message that names
# what to do, nothing half written, nothing left behind. Expected statuses are those of README.md.
#   sh tests/faults/run.sh BUILD
# Last line: "N passed, N failed".
set -u
LC_ALL=C.UTF-8
export LC_ALL
root=$(cd "$(dirname "$0")/../.." && pwd -P)
build=$(cd "$1" && pwd -P)
engine=$build/linewright
scratch=$(mktemp -d "${TMPDIR:-/tmp}/linewright-faults.XXXXXX")
child=
trap 'rm -rf "$scratch"' EXIT
trap '[ -z "$child" ] || kill "$child" 2>/dev/null; exit 130' INT TERM
cd "$scratch" || exit 1
demo=$root/scripts/demo
scripts=$root/scripts
passed=0 failed=0

check() { # check WHAT: judges the status of the command before it
  if [ $? -eq 0 ]; then
    passed=$((passed + 1))
  else
    failed=$((failed + 1))
    echo "FAILED: $1"
    [ ! -s "$scratch/err" ] || sed -n '1,6s/^/    | /p' "$scratch/err" | cut -c1-300
  fi
}
# ends STATUS COMMAND...: runs it, with stdout and stderr in files; true if it ends in that status.
ends() {
  want_=$1
  shift
  timeout -k 5 120 "$@" >"$scratch/out" 2>"$scratch/err" </dev/null
  got_=$?
  [ $got_ -eq "$want_" ] || { echo "    status $got_, not $want_: $*" | cut -c1-300; return 1; }
}
says() { grep -qE -- "$1" "$scratch/err"; }
calibrate() {
  "$engine" "$scripts/calibrate.lua" scan="$demo/lab6_after_service.xy" standard=lab6-660c radiation="Cu Ka" "$@"
}
recipe() { printf '%s\n' "$2" >"$scratch/$1.lua"; }

# --- usage ---------------------------------------------------------------------------------------
ends 2 "$engine" --no-such-option; check "an unknown option is a usage error"
[ ! -s "$scratch/out" ]; check "a usage error leaves stdout alone"
ends 0 "$engine" --help && [ -s "$scratch/out" ]; check "--help goes to stdout"
ends 0 "$engine" --version && grep -q '[0-9]\.[0-9]' "$scratch/out"; check "--version goes to stdout"
ends 0 "$engine" "$scripts/calibrate.lua" --help && grep -q standard "$scratch/out"; check "a recipe lists its inputs"
ends 1 "$engine" "$scripts/calibrate.lua" scann=x && says 'calibrate\.lua:[0-9]+:.*did you mean .scan'
check "an unknown input is an error of the recipe's, with the nearest spelling"

# --- bad files -----------------------------------------------------------------------------------
: >empty.xy
printf '10 1\n10.1 2\nten three\n10.3 4\n' >words.xy
printf '10 1\n10.1 2\n10.05 3\n10.3 4\n' >back.xy
gzip -c "$demo/lab6_after_service.xy" | head -c 3000 >cut.xy.gz
head -c 4000 /dev/urandom >noise.xy
mkdir folder.xy
for file in missing.xy empty.xy words.xy back.xy cut.xy.gz noise.xy folder.xy; do
  ends 1 "$engine" "$scripts/calibrate.lua" scan="$file" standard=lab6-660c radiation="Cu Ka" out=bad
  check "$file is refused"
  says "$file"; check "the message about $file names it"
  [ ! -e bad/calibration.json ]; check "$file leaves no calibration"
done
ends 1 "$engine" "$scripts/calibrate.lua" scan=words.xy standard=lab6-660c radiation="Cu Ka" out=bad &&
  says 'words\.xy:3'; check "the message names the line"
ends 1 "$engine" "$scripts/calibrate.lua" scan="$demo/lab6_after_service.xy" standard=lab6-660x radiation="Cu Ka" out=bad &&
  says 'lab6-660'; check "an unknown standard gets the nearest name"
printf '{"schema": "linewright/calibration/1", "profile": ' >broken.json
ends 1 "$engine" "$scripts/size_strain.lua" scan="$demo/nickel_milled_04h.xy" material=nickel calibration=broken.json out=bad &&
  says 'broken\.json'; check "a cut calibration is refused by name"

# --- writing -------------------------------------------------------------------------------------
calibrate out=good >"$scratch/out" 2>"$scratch/err" </dev/null && [ -s good/calibration.json ]
check "a sound job works"
cp good/calibration.json before.json 2>/dev/null
( # 8 KiB: less than a record; stdout is no file, so only the records meet the limit
  ulimit -f 16
  calibrate out=good
) >/dev/null 2>"$scratch/err" </dev/null
[ $? -eq 1 ]; check "a file that can't be written whole is an error, not a death"
cmp -s before.json good/calibration.json; check "and the older record is untouched"
[ -z "$(find good -newer before.json -name '*.tmp*' 2>/dev/null)" ] && [ -z "$(find good -name '.*' -type f)" ]
check "and no temporary file stays"
: >plain
ends 1 "$engine" "$scripts/calibrate.lua" scan="$demo/lab6_after_service.xy" standard=lab6-660c radiation="Cu Ka" out=plain &&
  says plain; check "an out that is a file is named"
if [ -c /dev/full ]; then
  "$engine" -e 'for i = 1, 1e5 do print(i) end' >/dev/full 2>"$scratch/err" </dev/null
  [ $? -eq 1 ]; check "a full stdout is an error"
fi
{ "$engine" -e 'for i = 1, 1e6 do print(i) end' 2>"$scratch/err" </dev/null; echo $? >status; } | head -n 1 >/dev/null
[ "$(cat status)" -le 141 ] && ! says 'Sanitizer|core'; check "a closed pipe ends it quietly"
(
  PATH=/nowhere
  export PATH
  calibrate out=plotless
) >"$scratch/out" 2>"$scratch/err" </dev/null
status=$?
[ $status -eq 1 ] && says '[Gg]nuplot' || { [ $status -eq 0 ] && [ -s plotless/report.html ]; }
check "without gnuplot it still reports, or says what is missing"

# a gnuplot that fails, dies, floods, or answers nothing: the record is there, the report says what is missing
plot() { # plot NAME TEXT: a folder with a gnuplot of that text
  mkdir -p "$1"
  printf '#!/bin/sh\n%s\n' "$2" >"$1/gnuplot"
  chmod +x "$1/gnuplot"
}
plot fails 'cat >/dev/null; echo "no terminal svg" >&2; exit 1'
plot dies 'read -r line; kill -KILL $$'
plot deaf 'exec <&-; exit 0'
plot lies 'cat >/dev/null; echo "not a drawing"'
plot half 'cat >/dev/null; printf "<?xml version"; kill -SEGV $$'
plot nothing 'cat >/dev/null'
plot shut 'exit 0'
for kind in fails dies deaf lies half nothing shut; do
  (PATH=$scratch/$kind:$PATH calibrate out="plot_$kind") >"$scratch/out" 2>"$scratch/err" </dev/null
  [ $? -eq 0 ] && says 'figures are missing'; check "a gnuplot that $kind doesn't stop the job, and a warning says so"
  cmp -s good/calibration.json "plot_$kind/calibration.json" || {
    for folder in good "plot_$kind"; do sed -E '/"(date|out)": /d' $folder/calibration.json >"$folder.plain"; done
    cmp -s good.plain "plot_$kind.plain"
  }
  check "the record is the same with a gnuplot that $kind"
  grep -q 'gnuplot' "plot_$kind/report.html" 2>/dev/null; check "the report says so too ($kind)"
done
plot hangs 'exec sleep 600'
(PATH=$scratch/hangs:$PATH timeout -k 5 100 "$engine" --time-limit=4 "$scripts/calibrate.lua" \
  scan="$demo/lab6_after_service.xy" standard=lab6-660c radiation="Cu Ka" out=plot_hangs) \
  >"$scratch/out" 2>"$scratch/err" </dev/null
[ $? -eq 1 ] && says 'time limit'; check "a gnuplot that hangs is ended by the time limit"
[ -s plot_hangs/calibration.json ]; check "with the record written before"
if [ "${LW_SLOW:-no}" = yes ]; then # it takes the full minute that gnuplot is given
  (PATH=$scratch/hangs:$PATH timeout -k 5 100 "$engine" "$scripts/calibrate.lua" \
    scan="$demo/lab6_after_service.xy" standard=lab6-660c radiation="Cu Ka" out=plot_waits) \
    >"$scratch/out" 2>"$scratch/err" </dev/null
  [ $? -eq 0 ] && says 'figures are missing.*no answer within'; check "a gnuplot that hangs is given a minute"
fi
[ -z "$(ps -e -o args= 2>/dev/null | grep -F "$scratch/hangs" | grep -v grep)" ]; check "and no gnuplot stays behind"

# a full disk, and a folder that may not be written to
if [ "$(id -u)" -eq 0 ] && mkdir disk && mount -t tmpfs -o size=64k tmpfs disk 2>/dev/null; then
  calibrate out=disk/o >"$scratch/out" 2>"$scratch/err" </dev/null
  [ $? -eq 1 ] && says 'No space left|full' && says 'free some space'; check "a full disk is an error that says what to do"
  [ -z "$(find disk -name '*.part')" ]; check "and nothing half written stays on it"
  for file in $(find disk -name '*.json'); do grep -q '^}' "$file"; check "$file on the full disk is whole"; done
  umount disk
else
  echo "    left out: a full disk (it takes root and a tmpfs)"
fi
mkdir -p locked && chmod 0555 locked
if [ "$(id -u)" -ne 0 ]; then
  calibrate out=locked/o >"$scratch/out" 2>"$scratch/err" </dev/null
  [ $? -eq 1 ] && says 'locked.*[Pp]ermission denied'; check "an unwritable folder is named"
elif command -v setpriv >/dev/null 2>&1; then
  chmod 0755 "$scratch"
  setpriv --reuid=65534 --regid=65534 --clear-groups "$engine" -e "
    local lw = require 'linewright'
    lw.recipe { title = 't' }:write { a = 1 }" out=locked/o >"$scratch/out" 2>"$scratch/err" </dev/null
  status=$?
  if says 'failed to execute|can.t find'; then
    echo "    left out: an unwritable folder (nobody may not run $engine)"
  else
    [ $status -eq 1 ] && says 'locked.*[Pp]ermission denied'; check "an unwritable folder is named"
  fi
fi

# a scan that changes while the job runs: what was hashed is what was read, or the job says that they differ
cp "$demo/nickel_milled_04h.xy" changing.xy
recipe change 'local lw = require "linewright"
local job = lw.recipe { title = "t", inputs = { scan = { kind = "file" } } }
local before = os.clock()
while os.clock() - before < 1.5 do end
local scan = lw.read_scan(job.scan, { radiation = "Cu Ka" })
job:write { hash = scan.hash, n = scan.n }'
("$engine" change.lua scan=changing.xy out=changed) >"$scratch/out" 2>"$scratch/err" </dev/null &
child=$!
sleep 0.7
head -n 2000 "$demo/nickel_milled_04h.xy" >shorter.xy && mv shorter.xy changing.xy
wait "$child"
status=$?
child=
if [ $status -eq 0 ]; then
  grep -q "\"hash\": \"$(sha256sum changing.xy | cut -d' ' -f1)\"" changed/results.json
  check "the hash of a scan that changed is that of the bytes that were read"
  [ "$(grep -o "$(sha256sum changing.xy | cut -d' ' -f1)" changed/results.json | wc -l)" -eq 2 ] || says 'chang'
  check "and the record's list of files names the same bytes, or it warns"
else
  says 'chang'; check "a scan that changed is refused as such"
fi

# --- what a killed run left behind ---
# nobody has process 999999999 (Linux numbers them up to 4194304); what doesn't look just like a file of ours stays
mkdir -p swept/figures && echo keep >kept
for name in .lw-999999999-0.part figures/.lw-999999999-7.part; do echo half >swept/$name; done
for name in .lw-$$-0.part .lw-1-0.part .lw-999999999-0.part.txt .lw-0999999999-0.part .lw-999999999-00.part \
  .lw--999999999-0.part lw-999999999-0.part .lw-x-0.part; do echo keep >swept/$name; done
ln -s "$scratch/kept" swept/.lw-999999999-1.part
mkdir swept/.lw-999999999-2.part
recipe sweeps 'local lw = require "linewright"
local job = lw.recipe { title = "t" }
job:write { a = 1 }
job:write(lw.figure { name = "f", title = "t", x = { label = "x" }, y = { label = "y" },
  series = { { kind = "line", x = { 1, 2 }, y = { 1, 2 } } } })'
ends 0 "$engine" sweeps.lua out=swept; check "a run into a folder that a killed one has left"
[ ! -e swept/.lw-999999999-0.part ] && [ ! -e swept/figures/.lw-999999999-7.part ]
check "takes away what that one had not finished"
[ -L swept/.lw-999999999-1.part ] && [ -d swept/.lw-999999999-2.part ] && [ "$(cat kept)" = keep ] &&
  [ "$(cat swept/.lw-$$-0.part swept/.lw-1-0.part swept/.lw-999999999-0.part.txt swept/.lw-0999999999-0.part \
    swept/.lw-999999999-00.part swept/.lw--999999999-0.part swept/lw-999999999-0.part swept/.lw-x-0.part |
    grep -c keep)" -eq 8 ]
check "and nothing else: living processes, other names, links, folders"

# --- scripts that should not be trusted ------------------------------------------------------------
recipe execute 'os.execute("touch executed")'
recipe popen 'io.popen("touch executed"):close()'
recipe escape 'local lw = require "linewright"; local f = assert(io.open("../escaped", "w")); f:write("x"); f:close()'
recipe absolute "local f = assert(io.open('$scratch/escaped', 'w')); f:write('x'); f:close()"
recipe remove "os.remove('$scratch/before.json')"
recipe bytecode 'assert(load(string.dump(function() end), "x", "b"))'
recipe native 'assert(package.loadlib("/lib/x86_64-linux-gnu/libc.so.6", "system"))'
recipe debugger 'debug.getregistry()'
for name in execute popen escape absolute remove bytecode native debugger; do
  ends 1 "$engine" "$name.lua"; check "the script '$name' is stopped"
  says "$name\.lua:1"; check "the message about '$name' names its line"
done
[ ! -e executed ] && [ ! -e escaped ] && [ ! -e ../escaped ] && [ -e before.json ]; check "and none of them left a mark"

# --- limits and interruption -------------------------------------------------------------------------
recipe endless 'while true do end'
recipe stubborn 'while true do pcall(function() while true do end end) end'
recipe hungry 'local t = {} for i = 1, 1e9 do t[i] = ("x"):rep(1000) .. i end'
recipe greedy 'return ("x"):rep(1 << 34)'
ends 1 "$engine" --time-limit=1 endless.lua; check "a time limit stops an endless loop"
ends 1 "$engine" --time-limit=1 stubborn.lua; check "a loop of pcall can't swallow the limit"
ends 1 "$engine" --memory-limit=64 hungry.lua; check "a memory limit stops a hungry script"
ends 1 "$engine" --memory-limit=64 greedy.lua; check "and one that asks for all at once"
interrupt() { # interrupt SECONDS COMMAND...: sends SIGINT after a while; the status is its own
  seconds_=$1
  shift
  # a shell without job control starts background commands with SIGINT ignored; env undoes it
  env --default-signal=INT "$@" >"$scratch/out" 2>"$scratch/err" </dev/null &
  child=$!
  sleep "$seconds_"
  kill -INT "$child" 2>/dev/null
  wait "$child"
  status=$?
  child=
  return $status
}
if env --default-signal=INT true 2>/dev/null; then
  interrupt 1 "$engine" endless.lua
  [ $? -eq 130 ]; check "Ctrl-C stops a script with status 130"
  interrupt 0.5 "$engine" stubborn.lua
  [ $? -eq 130 ]; check "Ctrl-C stops a stubborn script"
  interrupt 0.3 "$engine" "$scripts/milling_series.lua" scans="$demo/nickel_milled_*.xy" material=nickel \
    calibration=good/calibration.json out=stopped
  status=$?
  [ $status -eq 130 ] || [ $status -eq 0 ]; check "Ctrl-C stops a series"
  [ $status -eq 0 ] || [ ! -e stopped/results.json ]; check "and it leaves no half record"
fi

# --- workers end with the process that made them -------------------------------------------------------
"$engine" "$scripts/milling_series.lua" scans="$demo/nickel_milled_*.xy" material=nickel calibration=good/calibration.json \
  workers=3 out=orphans >"$scratch/out" 2>"$scratch/err" </dev/null &
child=$!
waited=0
while [ "$(pgrep -cP "$child")" -lt 2 ] && [ $waited -lt 100 ]; do sleep 0.05; waited=$((waited + 1)); done
[ "$(pgrep -cP "$child")" -ge 2 ]; check "a series with workers has processes"
kill -KILL "$child"
wait "$child" 2>/dev/null
child=
sleep 1
[ "$(pgrep -cf 'out=orphan[s]')" -eq 0 ]; check "none of them outlives a parent that was killed"
[ ! -e orphans/results.json ] && [ -z "$(find orphans -name '*.part' 2>/dev/null)" ]; check "and nothing half written is left"
ends 0 "$engine" "$scripts/milling_series.lua" scans="$demo/nickel_milled_*.xy" material=nickel \
  calibration=good/calibration.json workers=2 out=orphans
check "a new run goes on"

# --- a series that is killed goes on where it was ----------------------------------------------------
sh "$root/tests/faults/kills.sh" "$build" 6 >"$scratch/kills" 2>&1
[ $? -eq 0 ]; check "a series that is killed again and again gives the same results"
grep -v ' passed, ' "$scratch/kills"

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
