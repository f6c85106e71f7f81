# After `make install` a host finds headers and libraries by pkg-config alone, and its program runs.
set -eu
place=$1
prefix=$(cd "$place" && pwd)/prefix

"${MAKE:-make}" --no-print-directory install PREFIX="$prefix"
export PKG_CONFIG_PATH="$prefix/lib/pkgconfig"
# Only what is installed may be used.
cp ffi-examples/minimal.c ffi-examples/minimal.toml tests/link/ranks.c tests/link/mass_only.toml "$place"
cd "$place"
mpicc=${MPICC:-mpicc}

${CC:-cc} minimal.c -o shared $(pkg-config --cflags --libs limnograph)
${CC:-cc} minimal.c -o static $(pkg-config --cflags limnograph) "$prefix/lib/liblimnograph.a" \
    $(pkg-config --static --libs-only-l limnograph | sed 's/-llimnograph//')
for kind in shared static; do
    ./$kind minimal.toml $kind.limno
    "$prefix/bin/limnograph" audit $kind.limno
done
$mpicc ranks.c -o ranks $(pkg-config --cflags --libs limnograph_mpi)
"$OLDPWD/$MPIRUN_SH" 3 ./ranks mass_only.toml ranks.limno
"$prefix/bin/limnograph" sight ranks.limno

# A package builder stages into DESTDIR; nothing in the files may tell of it.
cd "$OLDPWD"
"${MAKE:-make}" --no-print-directory install DESTDIR="$prefix/stage" PREFIX=/opt/somewhere WITH_MPI=no
test -x "$prefix/stage/opt/somewhere/bin/limnograph"
test ! -e "$prefix/stage/opt/somewhere/lib/liblimnograph_mpi.so"
! grep -r "$prefix" "$prefix/stage/opt/somewhere/lib/pkgconfig"
grep -x 'prefix=/opt/somewhere' "$prefix/stage/opt/somewhere/lib/pkgconfig/limnograph.pc"
