#!/bin/sh
# Eight recordings through cli/batch with one thread each, on two cores against one: batch_cores.sh PROGRAM [SECONDS]. Prints
# both times and their ratio, judges nothing. The machine should have two cores to spare.
set -eu
program=$(realpath "$1") seconds=${2:-20}
batch=$(cd "$(dirname "$0")/../../cli/batch" && pwd)
scene=$(cd "$(dirname "$0")/../scenes" && pwd)/ten-droplets.scene
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
cd "$work"
mkdir sheets
for n in 1 2 3 4 5 6 7 8; do
    sed "s/^seed=.*/seed=$n/; s/^duration=.*/duration=$seconds s/" "$scene" >scene
    "$program" simulate scene --out "film-$n" --quiet
    sed "s#\(video\|image\)=#\1=../film-$n/#" "film-$n/sheet.ini" >"sheets/$n.ini"
done
timed() { # cores
    start=$(date +%s.%N)
    snakemake -s "$batch/Snakefile" --profile "$batch/here" --cores "$1" --config sheets='sheets/*.ini' "out=on-$1" \
        "risefall=$program" >"log-$1" 2>&1
    date +%s.%N | awk -v start="$start" '{ printf "%.1f", $1 - start }'
}
one=$(timed 1)
two=$(timed 2)
awk -v one="$one" -v two="$two" 'BEGIN { printf "one core %.1f s, two cores %.1f s, ratio %.2f\n", one, two, two / one }'
