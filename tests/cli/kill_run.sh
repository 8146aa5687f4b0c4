#!/bin/sh
# Killed at any moment, a run leaves the earlier result or its own, whole: kill_run.sh PROGRAM [TIMES]; speaks TAP.
# Which of the two it is can be told from the note in summary.json; whole means that every file is as a run that was
# left alone would write it.
set -u
program=$(realpath "$1")
times=${2:-10}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
here=$(cd "$(dirname "$0")" && pwd)
. "$here/fixtures.sh"
cd "$work" || exit 1

recording && mkdir -p notes && cp recording.mkv reticle.png notes/ || exit 1
for version in old new; do
    { cat sheet.ini && printf '[notes]\nversion=%s\n' "$version"; } >"notes/$version.ini"
    "$program" run "notes/$version.ini" --out "whole-$version" --quiet || exit 1
done

tables_of() { (cd "$1" && cksum ./*.csv ./*.json); }
tables_of whole-old >old.sums
tables_of whole-new >new.sums

# How long a whole run takes here, in hundredths of a second: kills are spread over that and a fifth more.
start=$(date +%s%N)
"$program" run notes/old.ini --out result --quiet
span=$((($(date +%s%N) - start) / 10000000))

failures=0 replaced=0
i=0
while [ "$i" -lt "$times" ]; do
    i=$((i + 1))
    rm -rf result && cp -r whole-old result
    "$program" run notes/new.ini --out result --quiet &
    run=$!
    wait_cs=$((span * 12 * i / times / 10))
    sleep "$((wait_cs / 100)).$(printf '%02d' $((wait_cs % 100)))"
    kill -9 "$run" 2>/dev/null
    wait "$run" 2>/dev/null
    tables_of result >seen.sums
    if cmp -s seen.sums new.sums; then
        replaced=$((replaced + 1))
        echo "ok $i - killed after $wait_cs of $span hundredths: the new result, whole"
    elif cmp -s seen.sums old.sums; then
        echo "ok $i - killed after $wait_cs of $span hundredths: the old result, whole"
    else
        failures=$((failures + 1))
        echo "not ok $i - killed after $wait_cs of $span hundredths: neither the old nor the new result"
    fi
done
echo "# the new result $replaced times of $times"

# A run that is left alone clears what the killed ones left behind.
"$program" run notes/old.ini --out result --quiet
left=$(ls -A | grep -v -e recording -e reticle -e truth_ -e sheet -e sums -e '^notes$' -e '^whole-' -e '^result$')
[ -z "$left" ]
status=$?
[ "$status" -eq 0 ] && echo "ok $((times + 1)) - no debris" || echo "not ok $((times + 1)) - debris: $left"
echo "1..$((times + 1))"
[ "$failures" -eq 0 ] && [ "$status" -eq 0 ]
