#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# A checker that cannot complain is worthless: builds a folder with one breach of each rule and fails if
# check.sh misses one of them, or complains of more.
set -euo pipefail
here=$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)
root=$(mktemp -d)
trap 'rm -rf "$root"' EXIT
mkdir -p "$root/server/engine" "$root/server/service" "$root/client"
readonly licence='// SPDX-License-Identifier: Apache-2.0'

echo 'int x;' > "$root/client/no_header.cc"
{ echo "$licence"; printf 'int a;  // %0110d\n' 0; } > "$root/server/engine/wide.h"
{ echo "$licence"; echo 'auto t = std::chrono::steady_clock::now();'; } > "$root/server/engine/clock.cc"
cp "$root/server/engine/clock.cc" "$root/server/service/clock.cc"   # allowed there
{ echo "$licence"; yes '// filler' | head -n 400; } > "$root/client/long.cc" || true

expected=$(sort <<'LINES'
LICENSE:1: missing or not Apache-2.0, restore it
client/long.cc:401: more than 400 lines, split it by job
client/no_header.cc:1: no licence line, start with SPDX-License-Identifier: Apache-2.0
server/engine/clock.cc:2: asks the system for the time, take it as an argument or use a clock.h
server/engine/wide.h:2: longer than 110 columns, break the line
LINES
)
if found=$(bash "$here/check.sh" "$root" 2>/dev/null); then
  echo "check.sh ended with 0 on a folder full of breaches"
  exit 1
fi
diff <(printf '%s\n' "$expected") <(printf '%s\n' "$found" | sort) && echo "all breaches found"
