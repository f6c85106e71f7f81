#!/bin/sh
# Throws the build with MPI away when another MPI compiler is to be used than before: cargo does not see that the
# bindings it has are those of another library.
set -eu
folder=${BUILD:-target}/mpi
: "${MPICC:=mpicc}"
now=$(command -v "$MPICC" && "$MPICC" -show)
if [ -f "$folder/compiler" ] && [ "$(cat "$folder/compiler")" != "$now" ]; then
    rm -rf "$folder"
fi
mkdir -p "$folder"
printf '%s\n' "$now" >"$folder/compiler"
