#!/bin/sh
# Makes a static library whose only global symbols are limno_*, so that it clashes with nothing in a host,
# not even with another library that carries its own copy of Rust's runtime.
#
#   scripts/localise.sh IN.a OUT.a
set -eu

if [ $# -ne 2 ]; then
    echo "usage: $0 IN.a OUT.a" >&2
    exit 2
fi
in=$1
out=$2
: "${LD:=ld}" "${READELF:=readelf}" "${OBJCOPY:=objcopy}" "${AR:=ar}"

work=$(mktemp -d "${TMPDIR:-/tmp}/limnograph.XXXXXX")
trap 'rm -rf "$work"' EXIT INT TERM

symbols() {
    "$READELF" --symbols --wide "$1"
}

globals() {
    symbols "$1" | awk '($5 == "GLOBAL" || $5 == "WEAK") && $7 != "UND" { print $8 }' | sort -u
}

globals "$in" | grep '^limno_' >"$work/kept" || {
    echo "$0: $in defines no limno_ function" >&2
    exit 1
}

# One object with all that the kept functions need. Groups are dissolved: their members could not be
# merged with those of another library once their names are local.
sed 's/^/--undefined=/' "$work/kept" >"$work/roots"
"$LD" -r --gc-sections --force-group-allocation -o "$work/limnograph.o" "@$work/roots" "$in"
# What only removed sections asked for is still listed, without a binding that means anything, and would be
# asked of the host.
symbols "$work/limnograph.o" | awk '$5 == "LOCAL" && $7 == "UND" && $8 != "" { print $8 }' >"$work/unwanted"
# Rust keeps its intermediate code beside the machine code; link-time optimisers of other compilers trip over it.
"$OBJCOPY" --strip-debug --remove-section=.llvmbc --remove-section=.llvmcmd \
    --strip-symbols="$work/unwanted" "$work/limnograph.o"
"$OBJCOPY" --wildcard --keep-global-symbol='limno_*' "$work/limnograph.o"

rm -f "$work/out.a"
"$AR" -crsD "$work/out.a" "$work/limnograph.o"

globals "$work/out.a" >"$work/globals"
if ! cmp -s "$work/globals" "$work/kept"; then
    echo "$0: the global symbols of $out are not those wanted:" >&2
    diff "$work/kept" "$work/globals" >&2 || true
    exit 1
fi
mkdir -p "$(dirname "$out")"
mv -f "$work/out.a" "$out"
