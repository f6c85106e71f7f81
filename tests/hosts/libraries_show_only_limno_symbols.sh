# Only limno_ functions are visible in any library, those of the header are, and shared ones have their name.
set -eu
place=$1
lib=$BUILD/lib

sed -n 's/^[a-z].*[ *]\(limno_[a-z_]*\)(.*/\1/p' include/limnograph.h | sort -u >"$place/header"
test "$(wc -l <"$place/header")" -gt 10

for name in limnograph limnograph_mpi; do
    readelf --symbols --wide "$lib/lib$name.a" |
        awk '($5 == "GLOBAL" || $5 == "WEAK") && $7 != "UND" { print $8 }' | sort -u >"$place/$name.static"
    readelf --dyn-syms --wide "$lib/lib$name.so" |
        awk '($5 == "GLOBAL" || $5 == "WEAK") && $7 != "UND" { print $8 }' | sort -u >"$place/$name.shared"
    for kind in static shared; do
        if grep -v '^limno_' "$place/$name.$kind"; then
            echo "the above are visible in $name, $kind"
            exit 1
        fi
        diff "$place/header" "$place/$name.$kind" || {
            echo "$name, $kind, does not offer just what the header declares"
            exit 1
        }
    done
    readelf --dynamic "$lib/lib$name.so" | grep "SONAME.*\[lib$name\.so\.[0-9]*\]"
done
# Without MPI there is no trace of it.
! readelf --dynamic "$lib/liblimnograph.so" | grep -i 'NEEDED.*mpi'
readelf --dynamic "$lib/liblimnograph_mpi.so" | grep -i 'NEEDED.*mpi'
