#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# Installs what is missing, builds and runs every test. With HALFTURN_CLANG=1 the tree is compiled with Clang as well.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."

bash plugin/package/prepare.sh test
export CCACHE_DIR="${CCACHE_DIR:-$HOME/.cache/ccache}"
# Debian's Python modules belong to Debian's interpreter; another python3 may come first on the path.
export HALFTURN_PYTHON=/usr/bin/python3

echo "== build (GCC, Release)"
cmake -S . -B build -G Ninja -DCMAKE_CXX_COMPILER=g++ -DCMAKE_BUILD_TYPE=Release -DHALFTURN_TESTS=ON -DHALFTURN_BENCHMARKS=ON >/dev/null
cmake --build build -j2

if [[ ${HALFTURN_CLANG:-0} == 1 ]]; then
  echo "== compile (Clang 14)"
  cmake -S . -B build/clang -G Ninja -DCMAKE_CXX_COMPILER=clang++-14 -DCMAKE_BUILD_TYPE=Debug >/dev/null
  cmake --build build/clang -j2
fi

echo "== tests"
status=0
ctest --test-dir build --output-on-failure -j2 --no-tests=error 2>&1 | tee build/ctest.log || status=$?
total=$(sed -nE 's/.*tests failed out of ([0-9]+)$/\1/p' build/ctest.log | tail -n 1)
failed=$(sed -nE 's/.*, ([0-9]+) tests failed out of [0-9]+$/\1/p' build/ctest.log | tail -n 1)
printf '%d passed, %d failed\n' "$((${total:-0} - ${failed:-0}))" "${failed:-0}"
exit "$status"
