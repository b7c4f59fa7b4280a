#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# House rules that a program can check. Usage: check.sh [ROOT]. Each breach is a line
# "file:line: what, use what instead"; exit 1 if there is one. alarm.sh proves that it can complain.
set -euo pipefail
export LC_ALL=C.UTF-8   # so that grep counts characters, not bytes

readonly longest_line=110
readonly most_lines=400
# The files that may ask the system for the time; all others are given it.
readonly clock_files='^(server/service|client/lib)/clock\.(h|cc)$'
readonly clocks='(system|steady|high_resolution|file)_clock::now'
readonly clock_calls="$clocks|clock_gettime|gettimeofday|\btime\((nullptr|NULL|0)\)"

cd "${1:-$(dirname "${BASH_SOURCE[0]}")/../..}"
breaches=0

breach() {
  printf '%s\n' "$1"
  breaches=$((breaches + 1))
}

# Prints the files below the given folders that match the extended regular expression, build folders left out.
files() {
  local pattern="$1"
  shift
  local folders=()
  for folder in "$@"; do [[ -d $folder ]] && folders+=("$folder"); done
  [[ ${#folders[@]} -gt 0 ]] || return 0
  find "${folders[@]}" -path '*/build/*' -prune -o -type f -print | grep -E "$pattern" | sort || true
}

check_header() {
  head -n 3 "$1" | grep -q 'SPDX-License-Identifier: Apache-2.0' ||
    breach "$1:1: no licence line, start with SPDX-License-Identifier: Apache-2.0"
}

check_line_length() {
  local number
  while IFS=: read -r number _; do
    breach "$1:$number: longer than $longest_line columns, break the line"
  done < <(grep -nE ".{$((longest_line + 1)),}" "$1" || true)
}

check_clock() {
  [[ $1 =~ $clock_files ]] && return 0
  local number
  while IFS=: read -r number _; do
    breach "$1:$number: asks the system for the time, take it as an argument or use a clock.h"
  done < <(grep -nE "$clock_calls" "$1" || true)
}

check_size() {
  local lines
  lines=$(wc -l < "$1")
  ((lines <= most_lines)) || breach "$1:$lines: more than $most_lines lines, split it by job"
}

if ! grep -qs 'Apache License' LICENSE; then
  breach "LICENSE:1: missing or not Apache-2.0, restore it"
fi

while IFS= read -r file; do
  check_header "$file"
  check_line_length "$file"
done < <(files '\.(cc|h|proto|sh|js)$' server client proto tests deploy; [[ -f .ci/run ]] && echo .ci/run)

while IFS= read -r file; do
  check_clock "$file"
  check_size "$file"
done < <(files '\.(cc|h)$' server client)

if ((breaches > 0)); then
  echo "$breaches breaches of the house rules" >&2
  exit 1
fi
echo "house rules: kept"
