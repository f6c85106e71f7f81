#!/bin/bash
# Compiles and runs the programs of this folder against a library: tests/fortran/run.sh LIBDIR [PART OF A NAME]
#
# LIBDIR holds liblimnograph.so, and liblimnograph_mpi.so for the programs that say `ranks: ...`. A program gets a
# folder of its own as first argument; LIMNOGRAPH names the program limnograph, FC and MPIF90 the compilers, STANDARD
# a Fortran standard other than f2008.
set -uo pipefail

[ $# -ge 1 ] || { echo "usage: tests/fortran/run.sh LIBDIR [PART OF A NAME]" >&2; exit 2; }
lib=$(cd "$1" && pwd) || exit 2
filter=${2:-}
cd "$(dirname "$0")/../.." || exit 2
export FC=${FC:-gfortran} LIMNOGRAPH=${LIMNOGRAPH:-limnograph}
place=$(mktemp -d)
trap 'rm -rf "$place"' EXIT
passed=0 failed=0

said() {
    sed -n "s/^! $1: //p" "$2" | head -n 1
}

# The C half of a program, which its flags name, is compiled by a C compiler.
compile() {
    local flags=() flag
    for flag in $(said flags "$source"); do
        if [[ $flag == *.c ]]; then
            ${CC:-cc} -std=c99 -Wall -Wextra -Iinclude -c "$flag" -o "$program.o" || return
            flag=$program.o
        fi
        [ "$flag" = -Iinclude ] || flags+=("$flag")
    done
    $compiler -std="${STANDARD:-f2008}" -Wall -Wextra -pedantic -g -O1 "-J$place/$name.modules" include/limnograph.f90 \
        "$source" ${flags[@]+"${flags[@]}"} -o "$program" -L"$lib" "-Wl,-rpath,$lib" -l$library
}

# $1: name; then the command.
try() {
    local name=$1 log=$place/log
    shift
    mkdir -p "$place/$name"
    # Every process says ok, and nothing else is printed, neither by it nor by the library.
    if timeout --kill-after=5 120 "$@" "$place/$name" >"$log" 2>&1 </dev/null && [ "$(sort -u "$log")" = ok ]; then
        passed=$((passed + 1))
        echo "$name: ok"
    else
        failed=$((failed + 1))
        echo "$name: FAILED"
        sed 's/^/    /' "$log" | tail -n 40
    fi
}

for source in tests/fortran/*"$filter"*.f90; do
    # No name has the part.
    [ -e "$source" ] || continue
    name=$(basename "$source" .f90)
    program=$place/$name.program
    ranks=$(said ranks "$source")
    compiler=$FC library=limnograph
    [ -z "$ranks" ] || compiler=${MPIF90:-mpif90} library=limnograph_mpi
    mkdir -p "$place/$name.modules"
    if ! compile >"$place/log" 2>&1; then
        failed=$((failed + 1))
        echo "$name: does not compile"
        sed 's/^/    /' "$place/log"
        continue
    fi
    [ ! -s "$place/log" ] || sed "s/^/    /" "$place/log"
    if [ -z "$ranks" ]; then
        try "$name" "$program"
    else
        for count in $ranks; do
            try "${name}_on_$count" scripts/mpirun.sh "$count" "$program"
        done
    fi
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
