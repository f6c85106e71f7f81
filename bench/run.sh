#!/bin/bash
# Measures what the library costs; prints a table and writes target/bench/report.json: name → median, with name_min and
# name_max beside it. `make bench` builds what this needs.
#
# Adjustable (defaults fit 24 GiB and two cores, and end within 10 minutes):
#   ELEMENTS=20000000 gas elements    REPETITIONS=21 of each ratio    THREADS=2
#   STATIONS=10000                    FIXED_STEPS=400 measured steps with nothing lent
#   HOST_PAIRS=8 HOST_SIDE=32 HOST_STEPS=60    runs of Saltmarsh with and without the library
#   PARTS="sweep double stations exact numpy fixed ranks host"    what to measure
#
# Times are of this machine as it stands: leave it alone meanwhile. The exit status says whether everything ran and all
# agreed on the numbers, not how fast it was.
set -euo pipefail
cd "$(dirname "$0")/.."
export BUILD=${BUILD:-target}
place=$BUILD/bench
work=$place/series
program=$BUILD/bin/limnograph
elements=${ELEMENTS:-20000000} repetitions=${REPETITIONS:-21} threads=${THREADS:-2}
parts=${PARTS:-sweep double stations exact numpy fixed ranks host}
rm -rf "$work"
mkdir -p "$work"
# Threads of a rival that wait actively would take the cores away from whoever is measured next.
export OMP_WAIT_POLICY=passive OMP_PROC_BIND=false

figures=$place/figures
{
    echo "elements $elements"
    echo "threads $threads"
    echo "load_average_before $(cut -d' ' -f1 /proc/loadavg 2>/dev/null || echo 0)"
} >"$figures"

measure() { # $1: the part, a word of $parts; then what measures it
    case " $parts " in *" $1 "*) ;; *) return 0 ;; esac
    echo "-- $1" >&2
    shift
    "$@" >>"$figures"
    rm -rf "${work:?}"/*
}

measure sweep "$place/sweep" "$elements" "$repetitions" "$threads" "$work/single" "$program"
measure double "$place/sweep" "$elements" "$repetitions" "$threads" "$work/double" "$program" double
measure stations "$place/stations" "$elements" "$repetitions" "$threads" "$work/stations" "${STATIONS:-10000}"
measure exact "${CARGO:-cargo}" bench --quiet --locked --target-dir "$BUILD/alone" --bench exact -- "$elements" \
    "$repetitions"
measure numpy "$BUILD/python/bin/python" bench/numpy_expressions.py "$elements" "$repetitions" "$threads" \
    "$work/numpy.limno" "$place/libarrays.so" "$program"
measure fixed "$place/fixed_cost" "${FIXED_STEPS:-400}" "$work/fixed.limno"
measure fixed scripts/mpirun.sh 2 "$place/fixed_cost_mpi" "${FIXED_STEPS:-400}" "$work/fixed_2.limno"
measure ranks scripts/mpirun.sh 2 "$place/ranks" "$elements" "$repetitions" "$work/ranks"
measure host python3 bench/host_overhead.py "${HOST_PAIRS:-8}" "${HOST_SIDE:-32}" "${HOST_STEPS:-60}" "$work"

echo "load_average_after $(cut -d' ' -f1 /proc/loadavg 2>/dev/null || echo 0)" >>"$figures"
python3 bench/table.py "$figures" "$place/report.json"
echo "$place/report.json holds the same."
