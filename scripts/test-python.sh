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

# $1: the check; then its arguments.
check() {
    local name=$1
    shift
    "$python" "tests/astropy/$name.py" "$@" >"$place/$name.log" 2>&1
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

cargo run --quiet --locked --target-dir "$build/alone" --example print_units_and_cosmology -- "$place/units.json" || exit 1
check check_units_and_cosmology "$place/units.json"

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
