#!/bin/sh
# Sees to the tools that a build needs; quick when they are there.
#
#   scripts/prepare.sh [base] [mpi] [hosts] [tests]      (all when none is named)
#
#   base    the library and the program: Rust (1.95 or newer), a C compiler, binutils
#   mpi     the library with MPI: an MPI compiler, libclang
#   hosts   the programs in ffi-examples: mpirun, an MPI Fortran compiler, FFTW with MPI
#   tests   rustfmt and clippy, python3 with venv, clang, a C++ compiler, valgrind, pkg-config
#
# What is missing is installed with apt when this runs as root or may use sudo without a password. Otherwise
# the packages to ask an administrator for are printed, and the exit status is 1. The verdict is remembered in
# the build directory (BUILD, by default target) until a tool moves.
set -eu

groups=${*:-base mpi hosts tests}
build=${BUILD:-target}
: "${MPICC:=mpicc}" "${MPIF90:=mpif90}" "${CC:=cc}"
verdict="$build/prepared-$(echo "$groups" | tr ' ' '-')"

work=
cleanup() { [ -z "$work" ] || rm -rf "$work"; }
trap cleanup EXIT INT TERM

wants() { case " $groups " in *" $1 "*) true ;; *) false ;; esac; }
has() { command -v "$1" >/dev/null 2>&1; }

# Where the tools stand and what they are: when this has not changed, neither has the verdict.
fingerprint() {
    echo "$PATH"
    for tool in cargo rustc "$CC" "$MPICC" "$MPIF90" mpirun python3 clang "${CXX:-c++}" valgrind pkg-config ld; do
        path=$(command -v "$tool" 2>/dev/null) && ls -lL "$path"
    done
    cat "$0"
}

# Can a small program be built? $1: compiler; $2: file name; $3: text; then libraries.
builds() {
    compiler=$1 file=$2 text=$3
    shift 3
    printf '%s\n' "$text" >"$work/$file"
    (cd "$work" && "$compiler" "$file" -o probe "$@") >"$work/log" 2>&1
}

# Rust 1.95 or newer? rustup puts the pinned version in place by itself.
has_rust() {
    minor=$(cargo --version 2>/dev/null | sed -n 's/^cargo 1\.\([0-9]*\)\..*/\1/p')
    [ "${minor:-0}" -ge 95 ] && has rustc
}

has_libclang() {
    [ -z "${LIBCLANG_PATH:-}" ] || return 0
    for place in /usr/lib/llvm*/lib /usr/lib64/llvm*/lib /usr/lib /usr/lib64 /usr/lib/*-linux-gnu /usr/local/lib; do
        for library in "$place"/libclang.so* "$place"/libclang-[0-9]*.so*; do
            [ ! -e "$library" ] || return 0
        done
    done
    has llvm-config && ls "$(llvm-config --libdir)"/libclang.so* >/dev/null 2>&1
}

has_venv() {
    python3 -c 'import sys, venv, ensurepip; sys.exit(sys.version_info < (3, 11))' >/dev/null 2>&1
}

# Adds to `missing` one line for each need that is not met: what, and the Debian packages that meet it.
look() {
    missing=
    if wants base; then
        # The packages are those of Debian 12.
        has_rust || lacks "Rust 1.95 or newer, by rustup (https://rustup.rs) or as packages" rustc-web cargo-web
        builds "$CC" c.c 'int main(void) { return 0; }' || lacks "a C compiler ($CC)" gcc libc6-dev
        has ld && has objcopy && has readelf && has ar || lacks "binutils" binutils
    fi
    if wants mpi; then
        builds "$MPICC" mpi.c '#include <mpi.h>
int main(int n, char **v) { return MPI_Init(&n, &v); }' || lacks "an MPI C compiler ($MPICC)" libopenmpi-dev
        has_libclang || lacks "libclang" libclang-dev
    fi
    if wants hosts; then
        has mpirun || lacks "mpirun" openmpi-bin
        builds "$MPIF90" mpi.f90 'program probe
use mpi
end program' || lacks "an MPI Fortran compiler ($MPIF90)" gfortran libopenmpi-dev
        builds "$MPICC" fftw.c '#include <fftw3-mpi.h>
int main(void) { fftw_mpi_init(); return 0; }' -lfftw3_mpi -lfftw3 -lm || lacks "FFTW with MPI" libfftw3-dev libfftw3-mpi-dev
    fi
    if wants tests; then
        cargo fmt --version >/dev/null 2>&1 && cargo clippy --version >/dev/null 2>&1 ||
            lacks "rustfmt and clippy" rustfmt-web rust-web-clippy
        has_venv || lacks "python3, 3.11 or newer, with venv" python3 python3-venv
        has clang || lacks "clang" clang
        builds "${CXX:-c++}" cpp.cpp 'int main() { return 0; }' || lacks "a C++ compiler (${CXX:-c++})" g++
        has valgrind || lacks "valgrind" valgrind libc6-dbg
        has pkg-config || lacks "pkg-config" pkg-config
    fi
}

lacks() {
    what=$1
    shift
    missing="$missing$what: $*
"
}

packages() {
    printf '%s' "$missing" | sed 's/.*: //' | tr ' ' '\n' | sort -u | tr '\n' ' ' | sed 's/ $//'
}

say_missing() {
    echo "Missing:" >&2
    printf '%s' "$missing" | sed 's/: [^:]*$//; s/^/  /' >&2
}

ask_for() {
    say_missing
    cat >&2 <<TEXT

Ask an administrator for these packages (Debian, Ubuntu):
  apt-get install $(packages)
On other systems the same things go by other names (Fedora: openmpi-devel gcc-gfortran clang-devel clang
fftw-devel fftw-openmpi-devel). On a cluster, load the modules of a compiler, an MPI library, FFTW built with
that MPI library, and LLVM; MPICC and MPIF90 name other compiler wrappers, LIBCLANG_PATH the folder of libclang.
TEXT
    exit 1
}

mkdir -p "$build"
# With make -j several of us may run.
exec 9>"$build/prepare.lock"
if has flock; then flock 9; fi
now=$(fingerprint 2>/dev/null | cksum)
if [ -f "$verdict" ] && [ "$(cat "$verdict")" = "$now" ]; then
    exit 0
fi

work=$(mktemp -d "${TMPDIR:-/tmp}/limnograph.XXXXXX")
look
if [ -n "$missing" ]; then
    has apt-get || ask_for
    if [ "$(id -u)" -eq 0 ]; then
        as_root=
    elif has sudo && sudo -n true 2>/dev/null; then
        as_root="sudo -n"
    else
        ask_for
    fi
    echo "Installing with apt: $(packages)"
    # The lists may be old or absent; should they not be reachable, those at hand may do.
    $as_root apt-get update -qq || true
    # shellcheck disable=SC2046,SC2086
    if ! $as_root env DEBIAN_FRONTEND=noninteractive \
        apt-get install -y -qq --no-install-recommends $(packages) >"$work/apt.log" 2>&1; then
        tail -n 15 "$work/apt.log" >&2
        ask_for
    fi
    look
    [ -z "$missing" ] || ask_for
    now=$(fingerprint 2>/dev/null | cksum)
fi
echo "$now" >"$verdict"
