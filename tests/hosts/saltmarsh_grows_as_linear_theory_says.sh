#!/bin/bash
# Linear modes of the demo's universe grow by the growth factor D(a), within 5 %.
set -euo pipefail
"$MPIRUN_SH" 2 "$HOSTS/saltmarsh" --test growth --quiet
