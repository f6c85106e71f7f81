#!/bin/bash
# Each measured step costs exactly one collective, every other step none, and nothing is sent from rank to rank: every
# MPI call of the library is intercepted through MPI's profiling interface (tests/exact/calls_of_mpi.c). What the library
# refers to says the library itself, so that no call slips by.
set -euo pipefail
library=$2 place=$3
here=$(cd "$(dirname "$0")" && pwd)
source=$here/../exact/calls_of_mpi.c
read -r -a compiler <<<"${MPICC:-mpicc}"

# All functions of MPI, in either spelling, that the library does not define itself.
nm -D --undefined-only "$library" | awk '$NF ~ /^P?MPI_/ { sub(/@.*/, "", $NF); print $NF }' | sort -u >"$place/called"
if [ "$(wc -l <"$place/called")" -lt 10 ]; then
    echo "the library seems to call hardly any MPI:"
    cat "$place/called"
    exit 1
fi
if grep ^PMPI_ "$place/called"; then
    echo "these calls of the library cannot be intercepted"
    exit 1
fi
sed -n 's/^int \(MPI_[A-Za-z_0-9]*\)(.*/\1/p' "$source" | sort -u >"$place/by_hand"
comm -23 "$place/called" "$place/by_hand" >"$place/wanted"

# A wrapper for each of the others, from its declaration in mpi.h: count, and call the function with a P before its name.
echo '#include <mpi.h>' >"$place/declares.c"
"${compiler[@]}" -E -P "$place/declares.c" | tr '\n' ' ' | tr ';' '\n' | awk -v wanted="$place/wanted" '
    BEGIN { while ((getline name < wanted) > 0) missing[name] = 1 }
    {
        if (!match($0, /[^A-Za-z_0-9]MPI_[A-Za-z_0-9]+ *\(/)) next
        name = substr($0, RSTART + 1, RLENGTH - 2); gsub(/ /, "", name)
        if (!(name in missing)) next
        result = substr($0, 1, RSTART)
        sub(/^.*extern /, "", result)
        gsub(/__attribute__ *\(\([^()]*(\([^()]*\))?[^()]*\)\)/, "", result)
        list = substr($0, RSTART + RLENGTH); sub(/\).*/, "", list)
        arguments = ""
        number = split(list, parameter, ",")
        for (i = 1; i <= number && list !~ /^ *void *$/; i++) {
            word = parameter[i]
            gsub(/\[[^]]*\]|[ \t]+$/, "", word)
            sub(/^.*[^A-Za-z_0-9]/, "", word)
            arguments = arguments (i > 1 ? ", " : "") word
        }
        printf "%s %s(%s)\n{\n    seen(\"%s\");\n    return P%s(%s);\n}\n", result, name, list, name, name, arguments
        delete missing[name]
    }
    END { for (name in missing) { print "mpi.h does not declare " name > "/dev/stderr"; bad = 1 } exit bad }
' >"$place/calls_of_mpi.h"

"${compiler[@]}" -std=c99 -Wall -Wextra -Werror -O1 -g "-I$LIMNO_INCLUDE" "-I$here" "-I$place" "$source" \
    -o "$place/calls_of_mpi" "-L$LIMNO_LIB" "-Wl,-rpath,$LIMNO_LIB" -llimnograph_mpi -lpthread -lm

# Every function has a wrapper in the host, where the dynamic linker finds it before MPI's own.
nm -D --defined-only "$place/calls_of_mpi" | awk '$NF ~ /^MPI_/ { print $NF }' | sort -u >"$place/wrapped"
if [ -n "$(comm -23 "$place/called" "$place/wrapped")" ]; then
    echo "not intercepted:"
    comm -23 "$place/called" "$place/wrapped"
    exit 1
fi
echo "$(wc -l <"$place/called") functions of MPI are intercepted"
failed=0
for ranks in 1 2 3 4; do
    mkdir -p "$place/$ranks"
    "${MPIRUN:-mpirun}" --oversubscribe -n $ranks "$place/calls_of_mpi" "$place/$ranks" || failed=1
done
exit $failed
