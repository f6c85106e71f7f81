#!/bin/bash
# Runs Saltmarsh for a while on two ranks and holds one of its rows against sums done with numpy and astropy.
#
#   PYTHON=… rows_of_saltmarsh.sh FOLDER
set -euo pipefail
folder=$1
config=ffi-examples/saltmarsh/limnograph.toml
program=${BUILD:-target}/bin/limnograph
step=260
rm -rf "$folder"
mkdir -p "$folder"
scripts/mpirun.sh 2 "${BUILD:-target}/host/saltmarsh" --quiet --max-steps $((step + 4)) \
    --dump $step "$folder/particles" --config $config --series "$folder/rows.limno" >"$folder/log" 2>&1 ||
    { cat "$folder/log"; exit 1; }
"$program" export "$folder/rows.limno" --to csv -o "$folder/run.csv"
"$program" export "$folder/rows.limno" --to csv --table wind_shells -o "$folder/shells.csv"
"${PYTHON:-python3}" tests/astropy/check_saltmarsh_rows.py "$folder/particles" $config "$folder/run.csv" \
    "$folder/shells.csv"
