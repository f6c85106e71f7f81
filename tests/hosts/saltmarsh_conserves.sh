#!/bin/bash
# Baryons are conserved to rounding while they turn from gas into stars and black holes.
set -euo pipefail
"$MPIRUN_SH" 2 "$HOSTS/saltmarsh" --test conservation --quiet
