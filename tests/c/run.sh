#!/bin/bash
# Builds and runs the tests of the C interface.
#
#   tests/c/run.sh FOLDER_OF_LIBLIMNOGRAPH FOLDER_OF_LIBLIMNOGRAPH_MPI [PART OF A NAME]...
#
# One program a file. What a file says of itself in a comment decides how it is built and run:
#   ranks: 1 2 3          with MPI, on each of these numbers of ranks; without it the test runs alone
#   flags: -Ofast         for the compiler
#   link: static          with the static library
#   variants: clang …     once more: clang (that compiler), fast (-Ofast), traps (floating-point exceptions kill the
#                         host), sanitizer (address and undefined behaviour), valgrind
#   seconds: 60           the time it may take; 60 when it does not say
# Scripts tests/c/*.sh other than this one get both libraries as arguments and a folder of their own after them.
#
# The environment: CC, CLANG, CXX, MPICC, MPIRUN, LIMNOGRAPH (the program, which reads series back).
set -uo pipefail

if [ $# -lt 2 ]; then
    sed -n '2,4s/^# \{0,1\}//p' "$0" >&2
    exit 2
fi
here=$(cd "$(dirname "$0")" && pwd)
top=$(cd "$here/../.." && pwd)
alone=$(cd "$1" && pwd) || exit 2
mpi=$(cd "$2" && pwd) || exit 2
shift 2
filters=("$@")
: "${CC:=gcc}" "${CLANG:=clang}" "${MPICC:=mpicc}" "${MPIRUN:=mpirun}"
export CXX=${CXX:-g++}
export OMPI_ALLOW_RUN_AS_ROOT=1 OMPI_ALLOW_RUN_AS_ROOT_CONFIRM=1
# Ranks share processors here; containers forbid one process to read another's memory.
export OMPI_MCA_hwloc_base_binding_policy=none OMPI_MCA_btl_vader_single_copy_mechanism=none
export OMPI_MCA_btl_base_warn_component_unused=0 OMPI_MCA_mpi_yield_when_idle=1
place=$(mktemp -d "${TMPDIR:-/tmp}/limno-c-tests.XXXXXX")
trap 'rm -rf "$place"' EXIT
mkdir -p "$place/lib" "$place/bin" "$place/log"
passed=0 failed=0

# The libraries by the names that hosts link, whether they come from a build or an installed place.
for name in limnograph limnograph_mpi; do
    from=$alone
    [ $name = limnograph ] || from=$mpi
    for ending in so a; do
        file=$from/lib$name.$ending
        [ -e "$file" ] || file=$from/liblimnograph.$ending
        if [ ! -e "$file" ]; then
            echo "there is no lib$name.$ending in $from" >&2
            exit 2
        fi
        ln -s "$(realpath "$file")" "$place/lib/lib$name.$ending"
    done
    soname=$(objdump -p "$place/lib/lib$name.so" | awk '$1 == "SONAME" { print $2 }')
    ln -s "$(realpath "$place/lib/lib$name.so")" "$place/lib/$soname"
done
export LIMNO_LIB=$place/lib LIMNO_INCLUDE=$top/include

# What a source says of itself: `ranks: 1 2` → 1 2
said() {
    sed -n "s/^[ \t]*[*!/#]*[ \t]*$1:[ \t]*\(.*\)/\1/p" "$2" | head -n 1 | sed 's/[ \t]*\*\/[ \t]*$//'
}

wanted() {
    [ ${#filters[@]} -eq 0 ] && return 0
    local filter
    for filter in "${filters[@]}"; do
        [[ $1 == *"$filter"* ]] && return 0
    done
    return 1
}

verdict() {
    local name=$1 status=$2
    if [ "$status" -eq 0 ]; then
        passed=$((passed + 1))
        echo "test $name ... ok"
    else
        failed=$((failed + 1))
        echo "test $name ... FAILED (status $status$([ "$status" -ne 124 ] || echo ', out of time'))"
        tail -n 40 "$place/log/$name" | sed 's/^/    /'
    fi
}

# $1: name, $2: seconds; then the command. It gets a folder of its own as the last argument.
try() {
    local name=$1 seconds=$2
    shift 2
    wanted "$name" || return 0
    mkdir -p "$place/run/$name"
    # The sanitizer reports into files: the error output is that of the test, which it keeps an eye on.
    ASAN_OPTIONS=log_path=$place/log/$name.report UBSAN_OPTIONS=log_path=$place/log/$name.report \
        timeout --kill-after=5 "$seconds" "$@" "$place/run/$name" >>"$place/log/$name" 2>&1 </dev/null
    local status=$?
    cat "$place/log/$name".report* >>"$place/log/$name" 2>/dev/null
    verdict "$name" $status
    rm -rf "$place/run/$name"
}

# $1: source, $2: name, $3: variant or nothing
test_source() {
    local source=$1 name=$2 variant=${3:-} seconds ranks library=limnograph compiler=$CC flags before=()
    seconds=$(said seconds "$source")
    seconds=${seconds:-60}
    ranks=$(said ranks "$source")
    read -r -a flags <<<"$(said flags "$source")"
    if [ -n "$ranks" ]; then
        library=limnograph_mpi compiler=$MPICC
    fi
    case $variant in
        '') ;;
        clang)
            compiler=$CLANG
            if [ -n "$ranks" ]; then
                compiler="env OMPI_CC=$CLANG $MPICC"
            fi
            ;;
        fast) flags+=(-Ofast) ;;
        traps) flags+=(-DCHECK_TRAPS) ;;
        sanitizer) flags+=(-fsanitize=address,undefined -fno-sanitize-recover=all) ;;
        valgrind)
            before=(valgrind --quiet --error-exitcode=9 --leak-check=full --show-leak-kinds=definite --errors-for-leak-kinds=definite
                --trace-children=no "--suppressions=$here/valgrind.supp")
            [ -z "$ranks" ] || before+=(--leak-check=no)
            seconds=$((seconds * 5))
            ;;
        *)
            echo "$source: no variant is called $variant" >&2
            exit 2
            ;;
    esac
    [ -z "$variant" ] || name=${name}_with_$variant
    local link=("-L$place/lib" "-Wl,-rpath,$place/lib" "-l$library")
    if [ "$(said link "$source")" = static ]; then
        link=("$place/lib/lib$library.a" -lgcc_s -lutil -lrt -ldl)
    fi
    if ! $compiler -std=c99 -Wall -Wextra -Werror -O1 -g "-I$top/include" "-I$here" "${flags[@]}" "$source" \
        -o "$place/bin/$name" "${link[@]}" -lpthread -lm >"$place/log/$name" 2>&1; then
        verdict "$name" 1
        return
    fi
    if [ -z "$ranks" ]; then
        try "$name" "$seconds" "${before[@]}" "$place/bin/$name"
        return
    fi
    [ "$variant" = '' ] || ranks=${ranks##* }
    [ "$variant" != valgrind ] || ranks=2
    local count
    for count in $ranks; do
        try "${name}_on_$count" "$seconds" "$MPIRUN" --oversubscribe -n "$count" "${before[@]}" "$place/bin/$name"
    done
}

shopt -s nullglob
for source in "$here"/*.c; do
    name=$(basename "${source%.c}")
    if wanted "$name"; then
        test_source "$source" "$name"
    fi
    for variant in $(said variants "$source"); do
        if wanted "${name}_with_$variant"; then
            test_source "$source" "$name" "$variant"
        fi
    done
done
for script in "$here"/*.sh; do
    name=$(basename "${script%.sh}")
    [ "$name" != run ] || continue
    : >"$place/log/$name"
    try "$name" 120 bash "$script" "$place/lib/liblimnograph.so" "$place/lib/liblimnograph_mpi.so"
done

echo "$passed passed, $failed failed"
[ "$failed" -eq 0 ]
