#!/usr/bin/env bash
# SPDX-License-Identifier: Apache-2.0
# The daemon and a careful SciPy script on the same simulated scans, side by side: compare.sh PROGRAM [SCANS [SEED [THREADS]]],
# PROGRAM being build/bin/halfturn-campaign. Needs Debian's python3-scipy. Exits with 1 where the counts do not add up.
set -euo pipefail
program=${1:?the path of halfturn-campaign} scans=${2:-4500} seed=${3:-1} threads=${4:-2}
here=$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)
python=${HALFTURN_PYTHON:-/usr/bin/python3}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT

"$program" --dump "$work/scans" --scans "$scans" --seed "$seed"
OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1 "$python" "$here/careful_scipy.py" "$work/scans" "$work/answers" >"$work/used"
"$program" --score "$work/answers" --threads "$threads" | tee "$work/table"

# used + refused = scans in every row, for either; the rows add up to the scans asked for; the script counted alike.
awk -v scans="$scans" '
  $3 == "of" { theirs += $2; next }
  $1 == "all" { whole = $2; used = $10; next }
  $4 == "|" && $2 ~ /^[0-9]+$/ { sum += $2; if ($5 + $6 != $2 || $10 + $11 != $2) bad = 1 }
  END { if (bad || sum != scans || whole != scans || used != theirs) { print "the counts do not add up" > "/dev/stderr"; exit 1 } }
' "$work/used" "$work/table"
