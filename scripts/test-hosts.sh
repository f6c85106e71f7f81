#!/bin/bash
# Builds and runs the tests that are hosts: small Fortran programs, and scripts that use the built hosts. (Those
# in C have a script of their own, tests/c/run.sh.)
#
#   scripts/test-hosts.sh [PART OF A NAME]...
#
# tests/fortran/*.f90                one program each. A comment line `ranks: 1 2 3` in it means: with MPI, on each
#                                    of these numbers of ranks; without one it runs alone. `flags: -Ofast` are given
#                                    to the compiler; `link: static` takes the static library.
# tests/hosts/*.sh                   run as they are.
#
# All run in the top directory with a folder of their own as first argument, and pass when they end with status 0
# within the time limit. Programs and scripts find in the environment: BUILD, HOSTS (built programs), LIMNOGRAPH
# (the program), MPIRUN_SH (scripts/mpirun.sh).
set -uo pipefail

export BUILD=${BUILD:-target}
export HOSTS=$BUILD/host LIMNOGRAPH=$BUILD/bin/limnograph MPIRUN_SH=scripts/mpirun.sh
: "${CC:=cc}" "${MPICC:=mpicc}" "${MPIF90:=mpif90}"
limit=300
place=$BUILD/test/hosts
lib=$(cd "$BUILD/lib" && pwd)
passed=0 failed=0
filters=("$@")
rm -rf "$place"
mkdir -p "$place/bin"

wanted() {
    [ ${#filters[@]} -eq 0 ] && return 0
    for filter in "${filters[@]}"; do
        [[ $1 == *"$filter"* ]] && return 0
    done
    return 1
}

# What a source says of itself: `ranks: 1 2` → 1 2
said() {
    sed -n "s/^[ \t]*[*!/#]*[ \t]*$1:[ \t]*\(.*\)/\1/p" "$2" | head -n 1 | sed 's/[ \t]*\*\/[ \t]*$//'
}

verdict() {
    local name=$1 log=$2 status=$3
    if [ "$status" -eq 0 ]; then
        passed=$((passed + 1))
        echo "test $name ... ok"
    else
        failed=$((failed + 1))
        [ "$status" -ne 124 ] || echo "stopped after $limit s" >>"$log"
        echo "test $name ... FAILED (status $status)"
        tail -n 40 "$log" | sed 's/^/    /'
    fi
}

# $1: name; then the command.
try() {
    local name=$1
    shift
    mkdir -p "$place/$name"
    timeout --kill-after=5 "$limit" "$@" "$place/$name" >"$place/$name.log" 2>&1 </dev/null
    verdict "$name" "$place/$name.log" $?
}

build() {
    local source=$1 program=$2 kind=alone library=limnograph private
    [ -z "$(said ranks "$source")" ] || kind=mpi library=limnograph_mpi
    local flags link=(-L"$lib" "-Wl,-rpath,$lib" -l$library)
    read -r -a flags <<<"$(said flags "$source")"
    if [ "$(said link "$source")" = static ]; then
        link=("$lib/lib$library.a" -lgcc_s -lutil -lrt -lpthread -lm -ldl)
    fi
    case $source in
        *.c)
            local compiler=$CC
            [ $kind = alone ] || compiler=$MPICC
            $compiler -std=c11 -D_POSIX_C_SOURCE=200809L -Wall -Wextra -O1 -g -Iinclude "${flags[@]}" \
                "$source" -o "$program" "${link[@]}" -lm
            ;;
        *.f90)
            local compiler=${FC:-gfortran}
            [ $kind = alone ] || compiler=$MPIF90
            mkdir -p "$program.modules"
            $compiler -Wall -O1 -g "-J$program.modules" "${flags[@]}" include/limnograph.f90 \
                "$source" -o "$program" "${link[@]}"
            ;;
    esac
}

shopt -s nullglob
for source in tests/fortran/*.f90; do
    name=$(basename "${source%.*}")
    wanted "$name" || continue
    program=$place/bin/$name
    if ! build "$source" "$program" >"$place/$name.log" 2>&1; then
        verdict "$name" "$place/$name.log" 1
        continue
    fi
    ranks=$(said ranks "$source")
    if [ -z "$ranks" ]; then
        try "$name" "$program"
    else
        for count in $ranks; do
            try "${name}_on_$count" scripts/mpirun.sh "$count" "$program"
        done
    fi
done
for script in tests/hosts/*.sh; do
    name=$(basename "${script%.*}")
    wanted "$name" || continue
    try "$name" bash "$script"
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
