#!/bin/bash
# Measures how the cost grows, for SCALING.md: prints tables in Markdown. `make target/bench/growth target/bench/ranks
# target/bench/fixed_cost_mpi` builds what this needs.
#
#   ELEMENTS=20000000 REPETITIONS=7 THREADS=2 LARGEST_STATIONS=10000 bench/scaling.sh      (0: no table of stations)
set -euo pipefail
cd "$(dirname "$0")/.."
export BUILD=${BUILD:-target} OMP_WAIT_POLICY=passive OMP_PROC_BIND=false
place=$BUILD/bench
work=$place/growth.series
rm -rf "$work"
mkdir -p "$work"
"$place/growth" "${ELEMENTS:-20000000}" "${REPETITIONS:-7}" "${THREADS:-2}" "$work/growth" "${LARGEST_STATIONS:-10000}"
echo '| ranks | a step with nothing lent, µs | the same particles, over one rank |'
echo '| --- | --- | --- |'
for ranks in 1 2 4; do
    rm -rf "${work:?}"/*
    fixed=$(scripts/mpirun.sh $ranks "$place/fixed_cost_mpi" 200 "$work/fixed.limno" | awk 'NR == 1 { print $2 }')
    ratio=$(scripts/mpirun.sh $ranks "$place/ranks" "$((${ELEMENTS:-20000000} / 4))" "${REPETITIONS:-7}" "$work/ranks" |
        awk 'NR == 1 { print $2 }')
    echo "| $ranks | $fixed | $ratio |"
done
rm -rf "$work"
