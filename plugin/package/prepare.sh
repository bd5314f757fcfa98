#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# Installs the Debian packages that Halfturn lacks on this machine: `prepare.sh run` for building and running it,
# `prepare.sh test` for the tests as well. Says what it installs; uses sudo only where it is not root.
set -euo pipefail

run_packages=(
  g++ cmake ninja-build ccache pkg-config git ca-certificates
  libzmq3-dev cppzmq-dev libmsgpack-cxx-dev nlohmann-json3-dev libeigen3-dev libyaml-cpp-dev
  libsqlite3-dev libcli11-dev libspdlog-dev libfmt-dev libexpected-dev gnuplot-nox
  python3 python3-zmq python3-msgpack python3-numpy
)
test_packages=(
  catch2 clang-14 libclang-rt-14-dev libbenchmark-dev libgsl-dev libceres-dev sqlite3
  python3-scipy python3-lmfit python3-mpmath python3-sympy python3-qutip python3-jsonschema python3-yaml
)

wanted=("${run_packages[@]}")
[[ ${1:-run} == test ]] && wanted+=("${test_packages[@]}")

missing=()
for package in "${wanted[@]}"; do
  dpkg-query -W -f='${db:Status-Status}' "$package" 2>/dev/null | grep -qx installed || missing+=("$package")
done
((${#missing[@]})) || exit 0

as_root=()
if ((EUID != 0)); then
  command -v sudo >/dev/null || {
    echo "These Debian packages are missing and you are neither root nor is sudo here: ${missing[*]}" >&2
    echo "Ask an administrator to run: apt-get install ${missing[*]}" >&2
    exit 3
  }
  as_root=(sudo)
fi
echo "Installing from Debian: ${missing[*]}" >&2
"${as_root[@]}" apt-get update -q >&2
"${as_root[@]}" env DEBIAN_FRONTEND=noninteractive apt-get install -q -y --no-install-recommends "${missing[@]}" >&2
