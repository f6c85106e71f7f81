#!/bin/bash
# The same particles give the same rows to the bit: dealt to 1, 2, 3, 4 and 7 ranks, of which some may have none, measured
# by 1 to 4 threads each, in any order, as floats or doubles, as arrays of structs or structs of arrays, by hosts built
# plainly, with -Ofast, and killed by any floating-point exception, and on processors with wide vectors, narrow ones, and
# both at once. Numbers that are not finite are left out and counted everywhere alike. Columns of wall-clock time, as the
# series itself names them, stand apart. All this around a few stations, of which each has its rows, and around many, of
# which rows tell together. Each of several stations has the rows that it has alone, and the totals of many are the sums
# of theirs. The host is tests/exact/deal.c.
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
"$place/alone_plain" "$place/probe.limno" "$place/probe.expected" 1 structs f64 turn 0 128 0-1 || status=$?
case $status in
    0) ;;
    77) may_hide=no ;;
    *) exit 1 ;;
esac

# The table $2 of a series without the columns of wall-clock time.
cut_table() {
    "$LIMNOGRAPH" export "$1" --to csv --table "$2" -o "$place/table"
    awk -F, -v OFS=, '
        FNR == NR {
            if ($0 ~ /"name":/) { name = $0; gsub(/.*: "|".*/, "", name) }
            if ($0 ~ /"kind": "wall_clock"/) apart[name] = 1
            next
        }
        FNR == 1 { for (i = 1; i <= NF; i++) { name = $i; sub(/ \[.*/, "", name); if (name in apart) drop[i] = 1 } }
        { line = ""; for (i = 1; i <= NF; i++) if (!(i in drop)) line = line OFS $i; print substr(line, 2) }
    ' "$1/manifest-000001.txt" "$place/table"
}

# Runs one way, around $stations, and compares the tables: $1 ranks (0: the library without MPI), $2 how the host is
# built, then the words of deal.c. The run table does not depend on the stations.
runs=0
few=0-3 many=0-80
stations=$few
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
    set -- "$place/$name.limno" "$place/$name.expected" "$@" "$stations"
    if [ "$ranks" = 0 ]; then
        "${before[@]}" "$place/alone_$build" "$@"
    else
        "$MPIRUN_SH" "$ranks" "$place/mpi_$build" "$@"
    fi
    "$LIMNOGRAPH" audit "$place/$name.limno" >/dev/null
    local table shells=wind_shells
    if [ "$stations" = $many ]; then shells=wind_shells_summary; fi
    for table in run $shells; do
        cut_table "$place/$name.limno" $table >"$place/$name.$table"
        if [ ! -e "$place/reference.$table" ]; then
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
stations=$many
run 0 plain 1 structs f64 turn 0 native
run 0 fast 4 arrays f32 turn 26 128
run 0 traps 2 structs f32 turn 27 256
run 0 plain 2 arrays f64 turn 28 128
run 1 traps 3 arrays f32 turn 29 native
run 2 fast 2 structs f64 halves 30 mixed
run 3 plain 1 arrays f64 odd 31 native
run 4 traps 1 structs f32 blocks 32 128
run 7 fast 2 arrays f32 turn 33 native

# Measures around the stations $1 only.
measure() {
    "$place/alone_plain" "$place/some.limno" "$place/some.expected" 2 structs f64 turn 0 native "$1"
    cut_table "$place/some.limno" wind_shells
    rm -r "$place/some.limno"
}

# Each of the few has the rows that it has alone, and so have two of the many beside 63 others.
measure 16-80 >"$place/rest"
{ cat "$place/reference.wind_shells"; awk -F, '/made (16|79)/' "$place/rest"; } >"$place/several"
compared=0
for number in 0 1 2 16 79; do
    measure $number-$((number + 1)) >"$place/one"
    name=$(awk -F, 'NR == 2 { print $2 }' "$place/one")
    if ! cmp <(tail -n +2 "$place/one") <(awk -F, -v name="$name" '$2 == name' "$place/several"); then
        echo "the rows of the station $name are others than alone"
        exit 1
    fi
    compared=$((compared + $(wc -l <"$place/one") - 1))
done
echo "$compared rows of stations, the same alone"
[ $compared -eq 200 ]

# What is told of the many is so of the rows of each, which are exact: counts are equal; totals are the sums but for a
# rounding of 2^-40 solar masses (times km/s, through the shell) for each contribution and of the sum; percentiles are
# the values of the nearest rank.
measure 0-16 >"$place/first"
python3 - "$place/reference.wind_shells_summary" "$place/first" "$place/rest" <<'CHECK'
import csv, math, sys
def rows(path):
    with open(path) as file:
        return [{key.split(" [")[0]: value for key, value in row.items()} for row in csv.DictReader(file)]
each = rows(sys.argv[2]) + rows(sys.argv[3])
KPC_IN_KM, YEAR = 3.0856775814913674e16, 365.25 * 86400
checked, worst = 0, 0.0
for told in rows(sys.argv[1]):
    own = [row for row in each if (row["step"], row["shell"]) == (told["step"], told["shell"])]
    assert len(own) == 80 == int(told["stations"]), told
    elements = [int(row["elements"]) for row in own]
    assert sum(elements) == int(told["elements"]), told
    assert own[0]["radius_inner"] == told["radius_inner"] and own[0]["radius_outer"] == told["radius_outer"], told
    thickness = (float(told["radius_outer"]) - float(told["radius_inner"])) * KPC_IN_KM / YEAR
    for name, step in ("mass_outflow_rate", 2**-40 / thickness), ("mass_inflow_rate", 2**-40 / thickness), ("gas_mass", 2**-40):
        values = sorted(float(row[name]) for row in own)
        total, found = math.fsum(values), float(told[name + "_total"])
        allowed = sum(elements) * step + 82 * 2**-53 * total
        assert abs(found - total) <= allowed, (name, told, total)
        worst = max(worst, abs(found - total) / total)
        for percent in 16, 50, 84:
            value = values[math.ceil(80 * percent / 100) - 1]
            found = float(told[f"{name}_p{percent}"])
            assert abs(found - value) <= max(elements) * step + 2**-51 * value, (name, percent, told, value)
        checked += 4
print(f"{checked} numbers of many stations are those of their rows; totals within {worst:.1e}")
assert checked == 5 * 8 * 12
CHECK

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
        exit wrong || rows != 5 || columns < 50 || values < 250 || bad < 30 || checked < 50 || runs != 34
    }' "$place/reference.expected" "$place/reference.run"
awk -F, '
    FNR == 1 { for (i = 1; i <= NF; i++) { name = $i; sub(/ \[.*/, "", name); at[name] = i } next }
    {
        rows++
        elements += $at["elements"]
        of_station[$at["station"]]++
        if (!($at["mass_outflow_rate"] > 0 && $at["mass_inflow_rate"] > 0 && $at["elements"] > 2)) wrong = 1
    }
    END {
        for (name in of_station) { stations++; wrong = wrong || of_station[name] != 40 }
        print rows " rows of shells, " elements " elements in them"
        exit wrong || rows != 120 || stations != 3 || elements < 10000
    }
' "$place/reference.wind_shells"
[ $may_hide = yes ] || echo "this machine cannot hide its vectors: only valgrind had narrower ones"
echo "$((SECONDS - start)) s"
