#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# Replays a log of the demo and compares what is said of each channel with what happened to it:
#   - outside its own faults no channel has a trust under 0.5 for more than SHARE of the time, whatever the
#     plant does;
#   - within each fault the channel is found not sound with a probability of 0.95 at least.
# It guards against getting worse and proves no more: the basin's rig was tuned on this log, and other seeds
# of the same script need not pass (deploy/demo/README.md has the table).
# Usage: verdicts.sh STEELYARD FOLDER_OF_THE_DEMO EVENTS_FILE FOLDER_FOR_OUTPUT NAME SHARE
set -euo pipefail
steelyard=$1 demo=$2 events=$3 out=$4 name=$5 share=$6

mkdir -p "$out"
"$steelyard" replay --rig "$demo/$name.yaml" --log "$demo/$name.csv" --out "$out/$name.out.csv" \
  --channels "$out/$name.channels.csv"

# A channel that has come right again is given one minute to be believed.
awk -F, -v grace=60 -v most="$share" '
  FNR == 1 { file++; for (i = 1; i <= NF; i++) column[file, $i] = i; next }
  file == 1 { if ($3 != "plant") { n++; from[n] = $1; to[n] = $2; who[n] = $3; kind[n] = $4 } next }
  {
    if (!$column[2, "time"]) next
    t = $column[2, "time"]; channel = $column[2, "channel"]
    unsound = 1 - $column[2, "p.sound"]; own = 0
    for (i = 1; i <= n; i++) {
      if (who[i] != channel || t < from[i] || t > to[i] + grace) continue
      own = 1
      if (t <= to[i] && unsound > surest[i]) { surest[i] = unsound }
    }
    if (own) next
    rows[channel]++
    if ($column[2, "trust"] < 0.5) { low[channel]++; if (!(channel in first)) first[channel] = t }
  }
  END {
    for (channel in rows) {
      share = low[channel] / rows[channel]
      printf "%s: trust under 0.5 without a fault of its own: %.3f %% of the time\n", channel, 100 * share
      if (share > most) { bad = 1; printf "  too much; for the first time at %s\n", first[channel] }
    }
    for (i = 1; i <= n; i++) {
      printf "%s, %s from %s: not sound, %.1f %% at the surest\n", who[i], kind[i], from[i], 100 * surest[i]
      if (surest[i] < 0.95) { bad = 1; print "  less than 95 %" }
    }
    if (n == 0) { bad = 1; print "no fault in the events file" }
    exit bad
  }' "$events" "$out/$name.channels.csv"
