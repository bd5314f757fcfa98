#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# The whole job on one machine: a daemon, a simulated apparatus that sends it eight hours of scans, and the drift report.
set -euo pipefail

usage() {
  cat <<'END'
usage: bash examples/first-night.sh [--hours X] [--stay]

Installs the Debian packages that are missing (it names them first, and uses sudo only where it is not root), builds Halfturn
into build/, starts a daemon on free ports of 127.0.0.1 with examples/first-night.yaml, lets a simulated apparatus run through a
night of scans against it, prints how the night went and the drift report, and stops the daemon. The log, a CSV of all fits and
the daemon's own lines stay in a new folder, first-night-DATE-TIME, which it names.

  --hours X   simulated time; 8 without it
  --stay      leave the daemon running, and say how to stop it

HALFTURN=PROGRAM in the environment uses that program: nothing is installed or built.
END
}

hours=8 stay=0
while (($#)); do
  case $1 in
    --hours)
      hours=${2-}
      [[ $hours =~ ^[0-9]+([.][0-9]+)?$ ]] || { echo "first-night: --hours: found '$hours', expected a number such as 8" >&2 && exit 2; }
      shift 2 ;;
    --stay) stay=1 && shift ;;
    -h | --help) usage && exit 0 ;;
    *) usage >&2 && exit 2 ;;
  esac
done

here=$PWD
root=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
daemon=

say() { printf '\n== %s\n' "$*"; }

# The daemon answers what it has accepted within 10 s and ends; one that does not within 20 s is ended.
stop_daemon() {
  local pid=$daemon until=$((SECONDS + 20))
  daemon=
  [[ -n $pid ]] || return 0
  kill -TERM "$pid" 2>/dev/null || true
  while ((SECONDS < until)) && kill -0 "$pid" 2>/dev/null; do sleep 0.1; done
  kill -KILL "$pid" 2>/dev/null || true
  wait "$pid" 2>/dev/null || true
}
apparatus=
trap '[[ -z $apparatus ]] || kill -TERM "$apparatus" 2>/dev/null; stop_daemon' EXIT
trap 'exit 129' HUP
trap 'exit 130' INT
trap 'exit 143' TERM

fail() {
  printf 'first-night: %s\n' "$*" >&2
  exit 3
}

build() {
  say "packages"
  bash "$root/plugin/package/prepare.sh" run
  echo "all that building and running needs is installed"
  say "build (Release, in build/; the first time takes some minutes)"
  local cache=$root/build/CMakeCache.txt
  # A build folder that came with a copied tree knows the other place alone.
  if [[ -f $cache ]] && ! grep -qxF "CMAKE_HOME_DIRECTORY:INTERNAL=$root" "$cache"; then
    rm -rf "$cache" "$root/build/CMakeFiles"
  fi
  # What is configured already, perhaps with tests, stays as it is.
  [[ -f $cache && -f $root/build/build.ninja ]] ||
    cmake -S "$root" -B "$root/build" -G Ninja -DCMAKE_CXX_COMPILER=g++ -DCMAKE_BUILD_TYPE=Release -DHALFTURN_TESTS=OFF >/dev/null
  cmake --build "$root/build" -j2 --target halfturn
}

# A new folder: here, or where temporary files go if nothing may be written here.
new_folder() {
  local parent=$here name number=1
  [[ -w $parent ]] || parent=${TMPDIR:-/tmp}
  name=$parent/first-night-$(date +%Y%m%d-%H%M%S)
  folder=$name
  until mkdir "$folder" 2>/dev/null; do
    ((number++ < 100)) || fail "no folder could be made in $parent"
    folder=$name-$number
  done
}

# Starts the daemon in a session of its own, so that an interrupt from the keyboard ends the rehearsal and not the daemon, and
# waits at most 30 s until it answers. Port 0 takes any free one: a daemon that runs here already is left alone.
start_daemon() {
  sed -E 's|(tcp://127\.0\.0\.1):[0-9]+|\1:0|g; s|"127\.0\.0\.1:[0-9]+"|"127.0.0.1:0"|' "$root/examples/first-night.yaml" >"$folder/halfturn.yaml"
  "$halfturn" check "$folder/halfturn.yaml" >"$folder/daemon.log" 2>&1 || { cat "$folder/daemon.log" >&2 && fail "the configuration has faults"; }
  setsid "$halfturn" serve --config "$folder/halfturn.yaml" >/dev/null 2>"$folder/daemon.log" </dev/null &
  daemon=$!
  local until=$((SECONDS + 30))
  while ((SECONDS < until)); do
    endpoint=$(sed -nE 's/.*listening: requests ([^ ,]+),.*/\1/p' "$folder/daemon.log" | head -n 1)
    [[ -n $endpoint ]] && "$halfturn" status --endpoint "$endpoint" --timeout-s 2 >/dev/null 2>&1 && break
    kill -0 "$daemon" 2>/dev/null || { cat "$folder/daemon.log" >&2 && fail "the daemon ended instead of starting"; }
    sleep 0.1
  done
  ((SECONDS < until)) || { cat "$folder/daemon.log" >&2 && fail "the daemon did not answer within 30 s"; }
  sed '/listening/q' "$folder/daemon.log" # the safety caution, and where it listens
}

rehearse() {
  local status=0
  # An interrupt from the keyboard ends the night early: the apparatus takes it too, and prints the table so far.
  trap 'interrupted=1' INT
  "$halfturn" rehearse --drive red --endpoint "$endpoint" --hours "$hours" &
  apparatus=$!
  interrupted=1
  while ((interrupted)); do # a trapped signal ends `wait` before its time
    interrupted=0 status=0
    wait "$apparatus" || status=$?
  done
  apparatus=
  trap 'exit 130' INT
  # 1: some scans were refused, as the spoilt ones should be.
  ((status <= 1)) || { tail -n 5 "$folder/daemon.log" >&2 && fail "the rehearsal ended with status $status; the daemon's lines lie in $folder/daemon.log"; }
}

halfturn=${HALFTURN:-$root/build/bin/halfturn}
[[ -n ${HALFTURN:-} ]] || build
new_folder
say "daemon, in $folder"
start_daemon
say "a simulated apparatus: $hours hours of scans"
rehearse
say "drift report: halfturn drift --log $folder/nights.db"
"$halfturn" drift --log "$folder/nights.db" --csv "$folder/fits.csv"
say "state of the daemon: halfturn status --endpoint $endpoint"
"$halfturn" status --endpoint "$endpoint"

say "done"
cat <<END
The night lies in $folder
  nights.db      the log: every scan, fit, reply and applied pulse (SQLite)
  fits.csv       every fit, one a row
  daemon.log     what the daemon said
  halfturn.yaml  its configuration
END
if ((stay)); then
  printf 'The daemon keeps running as process %s and takes requests at %s. Stop it with:  kill %s\n' "$daemon" "$endpoint" "$daemon"
  daemon=
else
  stop_daemon
  echo "The daemon has been stopped."
fi
