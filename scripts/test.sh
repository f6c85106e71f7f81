#!/bin/bash
# Runs groups of tests one after the other, all of them whatever happens, and ends with the total.
#
#   scripts/test.sh GROUP...          each is the make target test-GROUP
set -uo pipefail

build=${BUILD:-target}
mkdir -p "$build/test"
passed=0 failed=0 broken=()

# Cargo's own words, and those of the programs here.
count() {
    awk -v which="$1" '
        /^test result: / || /^[0-9]+ passed, [0-9]+ failed$/ {
            gsub(/[.;,]/, " ")
            for (i = 2; i <= NF; i++) if ($i == which) sum += $(i - 1)
        }
        END { print sum + 0 }' "$2"
}

for group in "$@"; do
    log="$build/test/$group.log"
    printf '\n===== test-%s\n' "$group"
    start=$SECONDS
    "${MAKE:-make}" --no-print-directory "test-$group" 2>&1 | tee "$log"
    status=$?
    group_passed=$(count passed "$log") group_failed=$(count failed "$log")
    if [ "$status" -ne 0 ] && [ "$group_failed" -eq 0 ]; then
        group_failed=1
    fi
    # A group in which nothing was tried has not passed.
    if [ "$status" -eq 0 ] && [ "$group_passed" -eq 0 ]; then
        status=1 group_failed=1
        echo "test-$group: no test was run"
    fi
    [ "$status" -eq 0 ] || broken+=("$group")
    passed=$((passed + group_passed)) failed=$((failed + group_failed))
    lines+=("$(printf '  %-8s %5d passed, %d failed  (%d s)' "$group" "$group_passed" "$group_failed" $((SECONDS - start)))")
done

printf '\n===== total, in %d s\n' "$SECONDS"
printf '%s\n' "${lines[@]}"
echo "$passed passed, $failed failed"
if [ ${#broken[@]} -ne 0 ]; then
    echo "FAILED: ${broken[*]/#/test-}"
    exit 1
fi
