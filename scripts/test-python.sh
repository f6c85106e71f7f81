#!/bin/bash
# Runs the checks against astropy and scipy, each with what it needs. Each counts as one test; their own output says
# how many comparisons that is.
set -uo pipefail

build=${BUILD:-target}
python=$build/python/bin/python
place=$build/test/python
passed=0 failed=0
rm -rf "$place"
mkdir -p "$place"

# $1: the check; then the command that makes it.
check() {
    local name=$1
    shift
    "$@" >"$place/$name.log" 2>&1
    local status=$?
    sed 's/^/    /' "$place/$name.log"
    if [ $status -eq 0 ]; then
        passed=$((passed + 1))
        echo "test $name ... ok"
    else
        failed=$((failed + 1))
        echo "test $name ... FAILED (status $status)"
    fi
}

units_and_cosmology() {
    cargo run --quiet --locked --target-dir "$build/alone" --example print_units_and_cosmology -- "$place/units.json" &&
        "$python" tests/astropy/check_units_and_cosmology.py "$place/units.json"
}

check check_units_and_cosmology units_and_cosmology
check check_saltmarsh_rows env PYTHON="$python" tests/astropy/rows_of_saltmarsh.sh "$place/rows"

# A check that nobody runs would only seem to hold.
for script in tests/astropy/check_*.py; do
    name=$(basename "${script%.py}")
    if [ ! -e "$place/$name.log" ]; then
        failed=$((failed + 1))
        echo "test $name ... FAILED: scripts/test-python.sh does not run it"
    fi
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
