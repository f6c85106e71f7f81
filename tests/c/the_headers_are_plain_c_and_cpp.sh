#!/bin/bash
# Each header compiles by itself, without a warning, as C99, C11 and C17, as C++11 to C++20, with gcc and clang; and a
# C++ host links, opens and closes.
#
#   the_headers_are_plain_c_and_cpp.sh LIBRARY LIBRARY_WITH_MPI FOLDER
set -u
folder=$3 status=0
: "${CC:=gcc}" "${CXX:=g++}" "${CLANG:=clang}"
mpi_flags=$(mpicc -showme:compile 2>/dev/null || mpicc -compile_info 2>/dev/null | tr ' ' '\n' | grep '^-I')
warnings="-Wall -Wextra -Wpedantic -Werror -Wshadow -Wconversion"

try() {
    "$@" >"$folder/said" 2>&1 || {
        echo "$*"
        head -n 20 "$folder/said"
        status=1
    }
}

echo '#include "limnograph.h"
limno_clock a_clock = LIMNO_CLOCK_INIT;
limno_array an_array = LIMNO_ARRAY_INIT;
limno_tally_batch a_batch = LIMNO_TALLY_BATCH_INIT;
limno_options some_options = LIMNO_OPTIONS_INIT;
limno_standing a_standing = LIMNO_STANDING_INIT;
limno_status a_status = LIMNO_OK;' >"$folder/alone.c"
echo '#include "limnograph_mpi.h"
limno_status open_it(limno_run **run);
limno_status open_it(limno_run **run)
{
    return limno_open_mpi(LIMNO_VERSION, "a.toml", "a.limno", NULL, MPI_COMM_WORLD, run);
}' >"$folder/mpi.c"
cp "$folder/alone.c" "$folder/alone.cpp"
cp "$folder/mpi.c" "$folder/mpi.cpp"
for compiler in "$CC" "$CLANG"; do
    for standard in c99 c11 gnu17; do
        try "$compiler" -std=$standard $warnings -I "$LIMNO_INCLUDE" -c "$folder/alone.c" -o "$folder/o"
        # Warnings about the header of MPI are not for us to mend.
        try "$compiler" -std=$standard -Wall -Wextra -Werror -I "$LIMNO_INCLUDE" ${mpi_flags//-I/-isystem } -c "$folder/mpi.c" -o "$folder/o"
    done
done
for standard in c++11 c++14 c++17 c++20; do
    try "$CXX" -std=$standard $warnings -I "$LIMNO_INCLUDE" -c "$folder/alone.cpp" -o "$folder/o"
    try "$CXX" -std=$standard -Wall -Wextra -Werror -I "$LIMNO_INCLUDE" ${mpi_flags//-I/-isystem } -DOMPI_SKIP_MPICXX -c "$folder/mpi.cpp" -o "$folder/o"
done
# With nothing else included, before or after.
echo '#include <limnograph.h>' | try "$CC" -std=c99 $warnings -I "$LIMNO_INCLUDE" -x c -fsyntax-only -

cat >"$folder/host.cpp" <<'END'
#include <limnograph.h>
#include <string>
#include <vector>
int main(int, char **arguments)
{
    const std::string folder = arguments[1];
    const char *config = "[units]\nlength = \"kpc\"\nmass = \"Msun\"\nvelocity = \"km/s\"\n[cosmology]\nexpanding = false\n"
                         "[time]\ncoordinate = \"t\"\nunit = \"Myr\"\n[volume]\nnone = true\n[gauges]\nmass_budget = true\n";
    limno_options options = LIMNO_OPTIONS_INIT;
    options.config_text = config;
    limno_run *run = nullptr;
    if (limno_open(LIMNO_VERSION, nullptr, (folder + "/cpp.limno").c_str(), &options, &run) != LIMNO_OK) return 1;
    std::vector<double> mass(10, 1.5);
    for (uint64_t step = 1; step <= 3; step++) {
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = step, clock.time = double(step);
        if (limno_mark(run, &clock) != LIMNO_OK) return 2;
        if (limno_lend(run, "gas", "mass", mass.data(), mass.size(), sizeof mass[0], LIMNO_F64) != LIMNO_OK) return 3;
        if (limno_enter(run) != LIMNO_OK) return 4;
    }
    return limno_close(run) == LIMNO_OK ? 0 : 5;
}
END
try "$CXX" -std=c++11 $warnings -I "$LIMNO_INCLUDE" "$folder/host.cpp" -o "$folder/host" -L "$LIMNO_LIB" -Wl,-rpath,"$LIMNO_LIB" -llimnograph
try "$folder/host" "$folder"
exit $status
