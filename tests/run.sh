#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# Runs all tests: installs what Debian lacks, builds, runs ctest, whose summary comes last.
#   STEELYARD_JOBS=N          how many compilers and tests at once (default: one a core)
#   STEELYARD_SANITIZERS=1    also the fast tests under address+undefined and thread sanitizers
set -euo pipefail

if [[ $# -gt 0 ]]; then
  echo "usage: bash tests/run.sh      (see the head of the file for the variables it knows)" >&2
  exit 2
fi

cd "$(dirname "${BASH_SOURCE[0]}")/.."
# shellcheck source=deploy/packages.sh
source deploy/packages.sh
jobs=${STEELYARD_JOBS:-$(nproc)}
if ! [[ $jobs =~ ^[1-9][0-9]*$ ]]; then
  echo "STEELYARD_JOBS: is '$jobs'; must be a whole number from 1" >&2
  exit 2
fi

build() {
  cmake --preset "$1" -DBUILD_TESTING=ON >/dev/null
  cmake --build --preset "$1" -j "$jobs"
}

need_packages "${steelyard_packages[@]}" "${steelyard_test_packages[@]}"

if [[ ${STEELYARD_SANITIZERS:-0} == 1 ]]; then
  for preset in asan tsan; do
    build "$preset"
    # Under sanitizers the long suites would take hours and show no more than the short ones.
    ctest --preset "$preset" -j "$jobs" -LE slow
  done
fi

build release
ctest --preset release -j "$jobs"
