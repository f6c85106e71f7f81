#!/bin/bash
# The same particles give the same rows to the bit: dealt to 1, 2, 3, 4 and 7 ranks, of which some may have none, measured
# by 1 to 4 threads each, in any order, as floats or doubles, as arrays of structs or structs of arrays, by hosts built
# plainly, with -Ofast, and killed by any floating-point exception, and on processors with wide vectors, narrow ones, and
# both at once. Numbers that are not finite are left out and counted everywhere alike. Columns of wall-clock time, as the
# series itself names them, stand apart. The host is tests/exact/deal.c.
set -euo pipefail
place=$1
library=$(realpath "$BUILD/lib")
strict="-std=c99 -Wall -Wextra -Werror -Iinclude"
read -r -a mpicc <<<"${MPICC:-mpicc}"
read -r -a cc <<<"${CC:-cc}"
flags_plain="-O1 -g" flags_fast=-Ofast flags_traps="-O2 -DTRAPS"
link=("-L$library" "-Wl,-rpath,$library")
for build in plain fast traps; do
    flags=flags_$build
    # shellcheck disable=SC2086
    "${cc[@]}" $strict ${!flags} -DALONE tests/exact/deal.c -o "$place/alone_$build" "${link[@]}" -llimnograph -lm
    # shellcheck disable=SC2086
    "${mpicc[@]}" $strict ${!flags} tests/exact/deal.c -o "$place/mpi_$build" "${link[@]}" -llimnograph_mpi -lm
done

# Nothing multiplies and adds in one operation, which rounds once where two operations round twice.
for name in limnograph limnograph_mpi; do
    objdump -d --no-show-raw-insn "$library/lib$name.so" >"$place/instructions"
    awk -v name=$name '
        /^[0-9a-f]+ <.*>:$/ { place = $2 }
        /\t(mulsd|mulpd|vmulsd|vmulpd|fmul)[ \t]/ { plain++ }
        /\t(vfn?m(add|sub)|fn?madd|fn?msub|fml[as])/ { print name ": fused: " place " " $0; fused++ }
        END {
            print name ": " plain " multiplications, " fused + 0 " fused with an addition"
            exit fused > 0 || plain < 50
        }
    ' "$place/instructions"
done
rm "$place/instructions"

# Can this machine say that its vectors are narrower than they are?
may_hide=yes
status=0
"$place/alone_plain" "$place/probe.limno" "$place/probe.expected" 1 structs f64 turn 0 128 || status=$?
case $status in
    0) ;;
    77) may_hide=no ;;
    *) exit 1 ;;
esac

# Runs one way and takes its tables without the columns of wall-clock time: $1 ranks (0: the library without MPI), $2 how
# the host is built, then the words of deal.c.
runs=0
run() {
    local ranks=$1 build=$2 before=() name
    shift 2
    if [ "$build" = valgrind ]; then
        # Its processor has no vectors wider than 256 bits.
        build=plain before=(valgrind --quiet --error-exitcode=9)
    fi
    name=${ranks}_${before[*]:+valgrind_}${build}_$(tr ' ' _ <<<"$*")
    if [ "$may_hide" = no ]; then
        set -- "${@:1:5}" native
    fi
    set -- "$place/$name.limno" "$place/$name.expected" "$@"
    if [ "$ranks" = 0 ]; then
        "${before[@]}" "$place/alone_$build" "$@"
    else
        "$MPIRUN_SH" "$ranks" "$place/mpi_$build" "$@"
    fi
    "$LIMNOGRAPH" audit "$place/$name.limno" >/dev/null
    for table in run wind_shells; do
        "$LIMNOGRAPH" export "$place/$name.limno" --to csv --table $table -o "$place/table"
        awk -F, -v OFS=, '
            FNR == NR {
                if ($0 ~ /"name":/) { name = $0; gsub(/.*: "|".*/, "", name) }
                if ($0 ~ /"kind": "wall_clock"/) apart[name] = 1
                next
            }
            FNR == 1 { for (i = 1; i <= NF; i++) { name = $i; sub(/ \[.*/, "", name); if (name in apart) drop[i] = 1 } }
            { line = ""; for (i = 1; i <= NF; i++) if (!(i in drop)) line = line OFS $i; print substr(line, 2) }
        ' "$place/$name.limno/manifest-000001.txt" "$place/table" >"$place/$name.$table"
        if [ $runs -eq 0 ]; then
            cp "$place/$name.$table" "$place/reference.$table"
        elif ! cmp "$place/reference.$table" "$place/$name.$table"; then
            echo "$name: the table $table differs from that of the first run:"
            diff <(tr ',' '\n' <"$place/reference.$table") <(tr ',' '\n' <"$place/$name.$table") | head -n 20
            exit 1
        fi
    done
    if [ $runs -eq 0 ]; then
        cp "$place/$name.expected" "$place/reference.expected"
    fi
    cmp "$place/reference.expected" "$place/$name.expected"
    runs=$((runs + 1))
    rm -r "$place/$name"*
}

start=$SECONDS
run 0 plain 1 structs f64 turn 0 native
run 0 fast 4 arrays f32 turn 3 native
run 0 traps 2 structs f32 turn 4 native
run 0 plain 1 arrays f64 turn 5 128
run 0 fast 3 structs f32 turn 6 256
run 0 traps 4 arrays f64 turn 7 128
run 0 valgrind 2 arrays f32 turn 8 native
run 1 plain 1 arrays f64 turn 9 native
run 1 traps 4 structs f32 turn 10 native
run 2 plain 1 structs f32 blocks 0 native
run 2 fast 2 arrays f64 halves 11 native
run 2 traps 3 arrays f32 odd 12 native
run 2 plain 1 arrays f64 blocks 13 mixed
run 3 plain 1 structs f64 odd 14 native
run 3 fast 4 arrays f32 halves 15 native
run 3 traps 2 structs f64 blocks 16 native
run 3 plain 1 structs f32 turn 17 mixed
run 4 plain 1 arrays f32 blocks 18 128
run 4 fast 3 structs f64 odd 19 native
run 4 traps 2 structs f32 turn 20 native
run 4 plain 4 arrays f64 halves 21 native
run 7 fast 1 structs f32 halves 22 native
run 7 plain 2 arrays f64 turn 23 native
run 7 traps 4 arrays f32 odd 24 native
run 7 plain 3 structs f64 blocks 25 mixed

# What was compared is what it should be: every row, no column empty but those that cannot be known, every number that is
# not finite counted, gas in every shell, flowing out and in.
awk -F, -v runs=$runs '
    FILENAME ~ /expected$/ { expected[$0] = 1; split($0, word, " "); count[word[1]] = word[2]; bad += word[2]; next }
    FNR == 1 { for (i = 1; i <= NF; i++) { name[i] = $i; sub(/ \[.*/, "", name[i]) } columns = NF; next }
    {
        rows++
        for (i = 1; i <= NF; i++) {
            values += $i != ""
            if (name[i] in count) {
                checked++
                if ($i != count[name[i]]) {
                    print name[i] ": expected " count[name[i]] ", found " $i
                    wrong = 1
                }
            }
            since_last_row = name[i] ~ /_formed$|_from_stars$|_formed_over_expected$/
            if ($i == "" && name[i] != "mass_wind" && !(since_last_row && $1 == 1)) {
                print "row " $1 ": " name[i] " is null"; wrong = 1
            }
        }
    }
    END {
        print runs " runs, " rows " rows of the run, " columns " columns, " values " values each"
        print bad " numbers not finite, counted " checked " times"
        exit wrong || rows != 5 || columns < 50 || values < 250 || bad < 30 || checked < 50 || runs != 25
    }' "$place/reference.expected" "$place/reference.run"
awk -F, '
    FNR == 1 { for (i = 1; i <= NF; i++) { name = $i; sub(/ \[.*/, "", name); at[name] = i } next }
    {
        rows++
        elements += $at["elements"]
        if (!($at["mass_outflow_rate"] > 0 && $at["mass_inflow_rate"] > 0 && $at["elements"] > 20)) wrong = 1
    }
    END { print rows " rows of shells, " elements " elements in them"; exit wrong || rows != 40 || elements < 5000 }
' "$place/reference.wind_shells"
[ $may_hide = yes ] || echo "this machine cannot hide its vectors: only valgrind had narrower ones"
echo "$((SECONDS - start)) s"
