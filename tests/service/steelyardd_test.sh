#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# The program itself: exit codes, messages, port file, JSON log, orderly end.
#   steelyardd_test.sh PATH_OF_STEELYARDD
set -euo pipefail
steelyardd=$1
work=$(mktemp -d)
running=
trap '[[ -z $running ]] || kill "$running" 2>/dev/null || true; rm -rf "$work"' EXIT

fail() { echo "FAILED: $*" >&2; exit 1; }

# expect CODE PIECE ARGUMENTS...: the program ends with this code and says this
expect() {
  local code=$1 piece=$2 got=0
  shift 2
  "$steelyardd" "$@" >"$work/out" 2>&1 || got=$?
  [[ $got == "$code" ]] || fail "steelyardd $*: exit $got, expected $code: $(cat "$work/out")"
  grep -q -- "$piece" "$work/out" || fail "steelyardd $*: no \"$piece\" in: $(cat "$work/out")"
}

# start ARGUMENTS...: sets running and port
start() {
  rm -f "$work/port"
  "$steelyardd" --data "$work/new/data" --listen 127.0.0.1:0 --port-file "$work/port" "$@" 2>"$work/log" &
  running=$!
  for _ in $(seq 200); do
    [[ -s $work/port ]] && break
    sleep 0.05
  done
  port=$(cat "$work/port") || fail "no port file: $(cat "$work/log")"
}

stop() {
  local code=0
  kill -"$1" "$running"
  wait "$running" || code=$?
  running=
  [[ $code == 0 ]] || fail "exit $code after SIG$1: $(cat "$work/log")"
}

expect 0 '--rigs' --help
expect 2 '--data'
expect 2 'web' --data "$work/d" --web 127.0.0.1:7412
expect 2 'needs --listen-beyond-loopback' --data "$work/d" --listen 0.0.0.0:0
expect 2 'must be HOST:PORT' --data "$work/d" --listen 7411
expect 2 'no such directory' --data "$work/d" --rigs "$work/nowhere"
expect 2 'cannot be created' --data /proc/steelyard
expect 2 '--log' --data "$work/d" --log loud

mkdir "$work/rigs"
echo 'rig: [' >"$work/rigs/wrong.yaml"
start --rigs "$work/rigs" --log json
[[ -d $work/new/data ]] || fail "--data was not created"
expect 1 'in use' --data "$work/d" --listen "127.0.0.1:$port"
stop TERM
grep -q '"level":"error","message":".*wrong.yaml:' "$work/log" ||
  fail "no problem of wrong.yaml in: $(cat "$work/log")"
while read -r line; do
  [[ $line == '{"time":"'*'","level":"'*'","message":"'*'"}' ]] || fail "not a JSON line: $line"
done <"$work/log"

start
stop INT
grep -q 'ended' "$work/log" || fail "no orderly end in: $(cat "$work/log")"
echo passed
