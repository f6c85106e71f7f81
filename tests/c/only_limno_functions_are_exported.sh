#!/bin/bash
# The shared libraries define no symbol that could meet one of a host's but those of the interface, and all of those;
# the static ones as they are installed neither.
#
#   only_limno_functions_are_exported.sh LIBRARY LIBRARY_WITH_MPI FOLDER
set -u
declared=$(grep -ho 'limno_[a-z_]*(' "$LIMNO_INCLUDE/limnograph.h" | tr -d '(' | sort -u)
status=0
for library in "$1" "$2"; do
    exported=$(nm -D --defined-only "$library" | awk '{ print $3 }' | sed 's/@.*//' | sort -u)
    if [ "$exported" != "$declared" ]; then
        echo "$library exports other functions than the header declares:"
        diff <(echo "$declared") <(echo "$exported")
        status=1
    fi
done
# What the library without MPI needs of others.
if objdump -p "$1" | grep -i 'NEEDED.*mpi'; then
    echo "the library without MPI needs MPI"
    status=1
fi
exit $status
