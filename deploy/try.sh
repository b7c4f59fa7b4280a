#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# Shows Steelyard at work, from a fresh Debian 12 (as root, or with sudo): installs what it needs, builds,
# starts the service on a free port of this machine, feeds it a storm in a basin whose sensors go wrong, and
# shows who can be trusted. Leaves nothing running.
set -euo pipefail

usage() {
  cat <<'TEXT'
usage: bash deploy/try.sh [--once]
  (without)   feeds eight hours of log in eight minutes and shows them on one screen; Ctrl-C ends it
  --once      feeds as fast as it goes, tells what was found, and ends: 0 done, 1 something failed
TEXT
}

once=no
case "${1:-}" in
  '') ;;
  --once) once=yes ;;
  -h | --help)
    usage
    exit 0
    ;;
  *)
    echo "try.sh: does not know '$1'" >&2
    usage >&2
    exit 2
    ;;
esac
if [[ $# -gt 1 ]]; then
  echo "try.sh: takes one argument at most, has $#" >&2
  usage >&2
  exit 2
fi

cd "$(dirname "${BASH_SOURCE[0]}")/.."
# shellcheck source=deploy/packages.sh
source deploy/packages.sh
readonly bin=build/release/bin
readonly log=deploy/demo/basin.csv
work=$(mktemp -d)
service=''
watcher=''
feeder=''

# Ends what is still running; TERM lets the service shut down in order.
clean_up() {
  local pid
  for pid in $feeder $watcher $service; do kill -TERM "$pid" 2>/dev/null || true; done
  for pid in $feeder $watcher $service; do wait "$pid" 2>/dev/null || true; done
  rm -rf "$work"
}
trap clean_up EXIT
trap 'exit 130' INT TERM

fail() {
  echo "try.sh: $1" >&2
  if [[ -s $work/service.log ]]; then
    echo "--- the end of the service's log" >&2
    tail -n 20 "$work/service.log" >&2
  fi
  exit 1
}

step() { printf '\n== %s\n' "$1"; }

build() {
  local options=()
  # A folder where somebody develops keeps its tests; a new one does without, and so without GoogleTest.
  [[ -f build/release/CMakeCache.txt ]] || options+=(-DBUILD_TESTING=OFF)
  cmake --preset release "${options[@]}" >"$work/cmake.log" 2>&1 || {
    cat "$work/cmake.log" >&2
    fail "cmake could not set up build/release"
  }
  cmake --build --preset release -j "${STEELYARD_JOBS:-$(nproc)}" --target steelyard steelyardd ||
    fail "the build failed"
}

# The service takes any free port and writes it down once it listens.
start_service() {
  "$bin/steelyardd" --data "$work/data" --listen 127.0.0.1:0 --port-file "$work/port" --rigs deploy/demo \
    >"$work/service.log" 2>&1 &
  service=$!
  local tries
  for ((tries = 0; tries < 150; ++tries)); do
    if [[ -s $work/port ]]; then
      port=$(<"$work/port")
      return 0
    fi
    kill -0 "$service" 2>/dev/null || fail "the service ended by itself"
    sleep 0.2
  done
  fail "the service does not listen after 30 s"
}

# Feeds in the background and lets people look meanwhile; the watcher ends when the log does.
# show PACE OPTION...: the options are those of `steelyard watch`.
show() {
  local pace="$1" result=0
  shift
  "$bin/steelyard" watch --from "127.0.0.1:$port" --rig basin "$@" &
  watcher=$!
  sleep 1   # so that it sees the first readings, too
  "$bin/steelyard" feed --to "127.0.0.1:$port" --rig basin --log "$log" --pace "$pace" 2>"$work/feed.log" &
  feeder=$!
  wait "$feeder" || result=$?
  feeder=''
  if [[ $result -ne 0 ]]; then
    cat "$work/feed.log" >&2
    fail "feeding $log ended with $result"
  fi
  sleep 2   # what is on its way to the watcher arrives
  kill -TERM "$watcher" 2>/dev/null || true
  wait "$watcher" || result=$?
  watcher=''
  [[ $result -eq 0 ]] || fail "watching ended with $result"
}

closing() {
  cat <<TEXT

What really happened, minute by minute: deploy/demo/README.md. The rig: deploy/demo/basin.yaml.
Without a service: $bin/steelyard replay --rig deploy/demo/basin.yaml --log $log
Read on: README.md, then DEVELOPERS.md.
Steelyard advises. It is no safety function: trips and interlocks must not depend on it.
TEXT
}

step "Packages"
need_packages "${steelyard_packages[@]}" || exit 1
echo "all there"
step "Build (the first takes some minutes)"
build
step "Service"
start_service
echo "steelyardd listens on 127.0.0.1:$port with the rigs of deploy/demo"
step "A storm in a basin: three level sensors, a flow meter, two pumps"
if [[ $once == yes ]]; then
  show fast --words --every-moment --time rfc3339
elif [[ -t 1 ]]; then
  show x60
else
  show x60 --words --time rfc3339
fi
closing
