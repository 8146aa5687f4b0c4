#!/bin/bash
# Wall and CPU of `risefall paths` and `risefall run` over decoding alone (2 threads; CPU also against 1 thread),
# interleaved, median of ROUNDS (5).
# usage: decode_ratio.sh RISEFALL DECODE_ONLY SHEET...      each sheet's recording lies where its video= says
set -euo pipefail
[ $# -ge 3 ] || { sed -n '2,4s/^# //p' "$0" >&2; exit 2; }
risefall=$1 decode=$2
shift 2
rounds=${ROUNDS:-5}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
export LC_ALL=C TIMEFORMAT='%R %U %S'

# appends "wall cpu" of a command to a file
clock() {
    local log=$1
    shift
    { time "$@" > "$work/out" 2> "$work/err"; } 2>> "$work/$log.raw" || { cat "$work/err" >&2; exit 1; }
    tail -n 1 "$work/$log.raw" | awk '{ print $1, $2 + $3 }' >> "$work/$log"
}

median() { # log column
    awk -v c="$2" '{ print $c }' "$work/$1" | sort -g | awk '{ v[NR] = $1 } END { print v[int((NR + 1) / 2)] }'
}

ratio() { awk -v a="$1" -v b="$2" 'BEGIN { printf "%.2f", (b > 0 ? a / b : 0) }'; }

printf '%-24s %9s %9s %9s %9s %9s %11s %11s\n' recording 'decode s' 'paths s' 'run s' 'paths/dec' 'run/dec' 'paths cpu/1' 'run cpu/1'
for sheet in "$@"; do
    folder=$(dirname "$sheet")
    video=$folder/$(sed -n 's/^video *= *//p' "$sheet" | head -n 1)
    rm -f "$work"/*
    for ((i = 0; i < rounds; i++)); do
        clock two "$decode" "$video" 2
        clock paths "$risefall" paths "$sheet" -q --threads=2 --out "$work/result"
        clock one "$decode" "$video" 1
        clock run "$risefall" run "$sheet" -q --threads=2 --out "$work/result"
        rm -rf "$work/result"
    done
    d=$(median two 1) p=$(median paths 1) r=$(median run 1) c=$(median one 2)
    printf '%-24s %9.2f %9.2f %9.2f %9s %9s %11s %11s\n' "$(basename "$folder")" "$d" "$p" "$r" "$(ratio "$p" "$d")" \
        "$(ratio "$r" "$d")" "$(ratio "$(median paths 2)" "$c")" "$(ratio "$(median run 2)" "$c")"
done
