# SPDX-License-Identifier: Apache-2.0
# shellcheck shell=bash disable=SC2034
# What Debian 12 must have to build and run Steelyard: the one list, sourced by deploy/try.sh, tests/run.sh.

# Build tools, libraries.
readonly steelyard_packages=(
  build-essential cmake ninja-build pkg-config
  libeigen3-dev libboost-dev
  libgrpc-dev libgrpc++-dev libprotobuf-dev protobuf-compiler protobuf-compiler-grpc
  libspdlog-dev libyaml-cpp-dev libmuparser-dev libcli11-dev
)
# What the tests need beside.
readonly steelyard_test_packages=(libgtest-dev libgmock-dev libbenchmark-dev)

# need_packages NAME...: installs those that are missing; apt is left alone when none is. Returns 1, with a
# message, if that cannot be done.
need_packages() {
  local missing=() package
  for package in "$@"; do
    dpkg-query -W -f '${Status}' "$package" 2>/dev/null | grep -q 'ok installed' || missing+=("$package")
  done
  [[ ${#missing[@]} -gt 0 ]] || return 0
  local as_root=()
  if [[ $(id -u) -ne 0 ]]; then
    if ! command -v sudo >/dev/null; then
      echo "missing packages: ${missing[*]}; install them as root" >&2
      return 1
    fi
    as_root=(sudo)
  fi
  echo "Installing ${#missing[@]} Debian packages: ${missing[*]}" >&2
  "${as_root[@]}" env DEBIAN_FRONTEND=noninteractive apt-get update -qq >&2 &&
    "${as_root[@]}" env DEBIAN_FRONTEND=noninteractive \
      apt-get install -y -qq --no-install-recommends "${missing[@]}" >&2 && return 0
  echo "apt-get could not install them: see its messages above" >&2
  return 1
}
