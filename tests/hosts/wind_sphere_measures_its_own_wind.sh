#!/bin/bash
# The wind of wind_sphere.f90 settles to the steady one of Chevalier & Clegg 1985, Nature 317, 44: the mass that
# crosses every shell outside of the source is what enters inside, 2 Msun/yr. The mesh resolves it to 2 %. The
# series is the same to the last digit on any number of ranks.
set -euo pipefail
place=$1
for ranks in 1 2 3; do
    "$MPIRUN_SH" $ranks "$HOSTS/wind_sphere" ffi-examples/wind_sphere.toml "$place/$ranks.limno" 32 >"$place/log"
    "$LIMNOGRAPH" export "$place/$ranks.limno" --to csv --table wind_shells -o "$place/shells_$ranks.csv"
done
cmp "$place/shells_1.csv" "$place/shells_2.csv"
cmp "$place/shells_1.csv" "$place/shells_3.csv"
tail -n 5 "$place/shells_2.csv" | awk -F, '
    { rows++; out = $6; if (out < 1.96 || out > 2.04 || $7 != 0) { print "shell " $3 ": " out ", " $7; bad = 1 } }
    END { exit bad || rows != 5 }'
# Tallied: 2 Msun/yr over 16 R/v = 16 * 0.2 kpc / (1600 km/s), kpc and Julian year as the IAU has them.
"$LIMNOGRAPH" export "$place/2.limno" --to csv | awk -F, '
    NR == 1 { for (i = 1; i <= NF; i++) if ($i ~ /^tally_wind_mass \[/) column = i }
    NR > 1 { mass += $column }
    END {
        expected = 2 * 16 * 0.2 / 1600 * 3.0856775814913673e16 / (365.25 * 86400)
        exit !(mass > expected * (1 - 1e-9) && mass < expected * (1 + 1e-9))
    }'
