# The static library goes into hosts of several compilers, beside another library written in Rust, and fully static.
set -eu
place=$1
lib=$BUILD/lib
system="-lgcc_s -lutil -lrt -lpthread -lm -ldl"

rustc --edition 2024 -O --crate-type staticlib -o "$place/libother.a" tests/link/other.rs
try() {
    name=$1
    shift
    echo "$name: $*"
    "$@" -Iinclude -o "$place/$name"
    "$place/$name" tests/link/mass_only.toml "$place/$name.limno"
    "$LIMNOGRAPH" audit "$place/$name.limno"
}
ours="$lib/liblimnograph.a"
other="$place/libother.a"
try first gcc tests/link/two.c "$ours" "$other" $system
try second gcc tests/link/two.c "$other" "$ours" $system
try clang clang tests/link/two.c "$ours" "$other" $system
try no_pie gcc -no-pie tests/link/two.c "$ours" "$other" $system
try by_name gcc tests/link/two.c -L"$lib" -L"$place" -Wl,-Bstatic -llimnograph -lother -Wl,-Bdynamic $system
try all_static gcc -static tests/link/two.c "$ours" "$other" -lgcc_eh -lm

# Link-time optimisers of either compiler leave it alone.
for compiler in gcc clang; do
    $compiler -O2 -flto -Iinclude ffi-examples/minimal.c "$ours" $system -o "$place/minimal_$compiler"
    "$place/minimal_$compiler" ffi-examples/minimal.toml "$place/minimal_$compiler.limno"
done
