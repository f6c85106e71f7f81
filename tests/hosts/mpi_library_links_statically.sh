# A host with MPI links the static library by name, and the shared one too, and both record.
set -eu
place=$1
lib=$BUILD/lib
mpicc=${MPICC:-mpicc}

$mpicc -Iinclude tests/link/ranks.c -L"$lib" -Wl,-Bstatic -llimnograph_mpi -Wl,-Bdynamic -lm -o "$place/static"
$mpicc -Iinclude tests/link/ranks.c -L"$lib" -llimnograph_mpi -Wl,-rpath,"$(cd "$lib" && pwd)" -o "$place/shared"
! readelf --dynamic "$place/static" | grep NEEDED.*limnograph
readelf --dynamic "$place/shared" | grep NEEDED.*limnograph_mpi
for kind in static shared; do
    "$MPIRUN_SH" 2 "$place/$kind" tests/link/mass_only.toml "$place/$kind.limno"
    "$LIMNOGRAPH" audit "$place/$kind.limno"
done
