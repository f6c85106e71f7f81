#!/bin/bash
# Measures what the library costs; prints a table and writes target/bench/report.json (name → number).
#
#   ELEMENTS=4000000 REPETITIONS=21 THREADS=2 bench/run.sh
set -euo pipefail
cd "$(dirname "$0")/.."
build=${BUILD:-target}
place=$build/bench
rm -rf "$place"
mkdir -p "$place"
lib=$(cd "$build/lib" && pwd)
"${CC:-cc}" -std=gnu11 -O3 -march=native -fopenmp -Wall -Wextra -Iinclude bench/measure.c -o "$place/measure" \
    -L"$lib" -Wl,-rpath,"$lib" -llimnograph
"$place/measure" "${ELEMENTS:-4000000}" "${REPETITIONS:-21}" "${THREADS:-2}" "$place/bench.limno" >"$place/figures"
awk '
    { order[NR] = $1; value[$1] = $2 }
    END {
        printf "{\n" >report
        for (i = 1; i <= NR; i++) printf "  \"%s\": %s%s\n", order[i], value[order[i]], i < NR ? "," : "" >report
        printf "}\n" >report
        printf "%-24s %12s %12s %12s\n", "", "median", "least", "most"
        for (i = 1; i <= NR; i++) {
            name = order[i]
            if (name ~ /_(min|max)$/) continue
            printf "%-24s %12s %12s %12s\n", name, value[name], value[name "_min"], value[name "_max"]
        }
    }' report="$place/report.json" "$place/figures"
echo "$place/report.json holds the same"
