#!/bin/bash
# Runs the checks against astropy, scipy and Python's own exact arithmetic, each with what it needs. Each counts as one
# test; their own output says how many comparisons that is.
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

# Sums, extremes and counts, by the public Rust interface and by a host of the library.
sums_against_fsum() {
    mkdir -p "$place/sums" &&
        cargo build --quiet --locked --target-dir "$build/alone" --example exact_sums &&
        ${CC:-cc} -std=c99 -Wall -Wextra -Werror -O2 -Iinclude tests/exact/lend_lists.c -o "$place/lend_lists" \
            "-L$build/lib" "-Wl,-rpath,$(realpath "$build/lib")" -llimnograph &&
        PYTHONDONTWRITEBYTECODE=1 "$python" tests/exact/check_sums_against_fsum.py \
            "$build/alone/debug/examples/exact_sums" "$place/lend_lists" "$build/bin/limnograph" "$place/sums"
    local status=$?
    rm -rf "$place/sums"
    return $status
}

check check_units_and_cosmology units_and_cosmology
check check_saltmarsh_rows env PYTHON="$python" tests/astropy/rows_of_saltmarsh.sh "$place/rows"
check check_sums_against_fsum sums_against_fsum

# A check that nobody runs would only seem to hold.
for script in tests/astropy/check_*.py tests/exact/check_*.py; do
    name=$(basename "${script%.py}")
    if [ ! -e "$place/$name.log" ]; then
        failed=$((failed + 1))
        echo "test $name ... FAILED: scripts/test-python.sh does not run it"
    fi
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
