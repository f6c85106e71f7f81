#!/bin/bash
# Runs the tests that are hosts: C and Fortran programs, and scripts that use what has been built.
#
#   scripts/test-hosts.sh [PART OF A NAME]
#
# tests/c/run.sh and tests/fortran/run.sh have programs of their own. tests/hosts/*.sh are run here, in the top
# directory, with a folder of their own as argument; they find in the environment BUILD, HOSTS (built programs),
# LIMNOGRAPH (the program) and MPIRUN_SH (scripts/mpirun.sh), and pass when they end with status 0 in time.
set -uo pipefail

export BUILD=${BUILD:-target}
export HOSTS=$BUILD/host MPIRUN_SH=scripts/mpirun.sh
LIMNOGRAPH=$(cd "$BUILD/bin" && pwd)/limnograph
export LIMNOGRAPH
lib=$BUILD/lib
limit=300
place=$BUILD/test/hosts
filter=${1:-}
passed=0 failed=0
rm -rf "$place"
mkdir -p "$place"

# Runs a folder of programs and adds its numbers to ours.
folder() {
    local log=$place/$1.log
    shift
    echo "$1"
    # Its own total must not look like that of all.
    "$@" ${filter:+"$filter"} 2>&1 | sed -E 's/^([0-9]+ passed, [0-9]+ failed)$/  \1/' | tee "$log"
    local status=${PIPESTATUS[0]} numbers
    numbers=$(sed -n -E 's/^  ([0-9]+) passed, ([0-9]+) failed$/\1 \2/p' "$log" | tail -n 1)
    passed=$((passed + ${numbers% *} + 0)) failed=$((failed + ${numbers#* } + 0))
    if [ "$status" -ne 0 ] && [ "${numbers#* }" = 0 ]; then
        failed=$((failed + 1))
        echo "$1 ... FAILED (status $status)"
    fi
}

folder c tests/c/run.sh "$lib" "$lib"
folder fortran tests/fortran/run.sh "$lib"

echo tests/hosts
for script in tests/hosts/*"$filter"*.sh; do
    [ -e "$script" ] || continue
    name=$(basename "$script" .sh)
    mkdir -p "$place/$name"
    timeout --kill-after=5 "$limit" bash "$script" "$place/$name" >"$place/$name.log" 2>&1 </dev/null
    status=$?
    if [ $status -eq 0 ]; then
        passed=$((passed + 1))
        echo "test $name ... ok"
    else
        failed=$((failed + 1))
        echo "test $name ... FAILED (status $status$([ $status -ne 124 ] || echo ', out of time'))"
        tail -n 40 "$place/$name.log" | sed 's/^/    /'
    fi
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
