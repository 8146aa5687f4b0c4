#!/bin/sh
# Footage that others rendered, where it lies beside this checkout or where RISEFALL_FOOTAGE says: shared_footage.sh PROGRAM.
# Skipped (77) where it is absent, or without the Python packages that its score needs. Speaks TAP otherwise.
set -u
program=$(realpath "$1")
top=$(cd "$(dirname "$0")/.." && pwd)
footage=${RISEFALL_FOOTAGE:-$top/../shared/scenes}
python=""
for candidate in python3 /usr/bin/python3; do
    [ -n "$python" ] || ! "$candidate" -c 'import numpy, scipy' 2>/dev/null || python=$candidate
done
[ -f "$footage/calm/calm.mkv" ] && [ -f "$footage/score" ] || { echo '1..0 # SKIP no such footage here' && exit 0; }
[ -n "$python" ] || { echo '1..0 # SKIP the score needs python3-numpy and python3-scipy' && exit 0; }
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
count=0 failures=0

told() { # status, name
    count=$((count + 1))
    [ "$1" -eq 0 ] && echo "ok $count - $2" && return
    failures=$((failures + 1))
    echo "not ok $count - $2"
}

number_in() { sed -n "s/^ *\"$2\" *: *\([-+.0-9eE]*\),*$/\1/p" "$1"; }

is_true() { awk "BEGIN { exit !($1) }"; }

figure() { # name, comparison
    value=$(number_in "$work/score.json" "$1")
    [ -n "$value" ] && is_true "$value $2"
    told $? "$1: $value, needed $2"
}

"$program" run "$footage/calm/sheet.ini" --out "$work/calm" --quiet --no-preview
told $? 'calm is measured'
"$python" "$footage/score" "$footage/calm" "$work/calm" --json >"$work/score.json"
told $? 'the score is told'

figure tracking.recall '>= 0.95'
figure tracking.identity_switches '== 0'
figure tracking.spurious_tracks '== 0'
figure switches.recall '== 1'
figure switches.false '== 0'
figure switches.states_right '== 1'
figure charge.gross_errors '== 0'
figure charge.false_rows '== 0'
figure charge.integers_wrong '== 0'
figure charge.integers_named ">= $(number_in "$work/score.json" charge.accepted_rows)"
figure scale.px_per_mm_x_z '^ 2 < 9'
figure scale.px_per_mm_y_z '^ 2 < 9'

paste -d, "$work/calm/switches.csv" "$footage/calm/truth_switches.csv" | awk -F, '
    NR == 1 { for (i = NF; i > 0; i--) if ($i == "time_s") { if (real) found = i; else real = i }; next }
    ($found - $real) ^ 2 > (1 / 30) ^ 2 { late++ }
    END { exit NR < 2 || late > 0 }'
told $? 'every switch within one frame'

unit=$(number_in "$work/calm/summary.json" unit_charge_C) u=$(number_in "$work/calm/summary.json" u_unit_charge_C)
[ -n "$unit" ] && is_true "(($unit - 1.602176634e-19) / $u) ^ 2 < 4" # the elementary charge, CODATA 2018
told $? "unit of charge $unit, u $u"

echo "1..$count"
[ "$failures" -eq 0 ]
