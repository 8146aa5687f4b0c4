#!/bin/bash
# What bash offers where: completion.sh PROGRAM SCRIPT; speaks TAP. Lines are split as readline splits them (= is a word).
set -u
# shellcheck disable=SC1090 # the script under test
. "$2"
program=$(realpath "$1")
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
cd "$work" || exit 1
mkdir result 'other result'
touch morning.ini 'evening run.ini' notes.txt stopwatch.csv recording.mkv bench.scene
count=0 failures=0

offers() { # what must be offered, in order, with a bar between; then the words typed so far
    local needed=$1
    shift
    COMP_WORDS=("$@") COMP_CWORD=$(($# - 1)) COMPREPLY=()
    _risefall
    local seen
    seen=$(printf '%s\n' "${COMPREPLY[@]}" | LC_ALL=C sort | paste -s -d '|')
    count=$((count + 1))
    if [ "$seen" = "$needed" ]; then
        echo "ok $count - $*"
    else
        failures=$((failures + 1))
        echo "not ok $count - $*"
        echo "# offered $seen"
        echo "# needed  $needed"
    fi
}

verbs=$("$program" --help | sed -n 's/^  \([a-z]*\) .*/\1/p' | LC_ALL=C sort | paste -s -d '|')
[ -n "$verbs" ] || exit 1
offers "run" risefall ru
offers "--help|--version" risefall -
offers "check" risefall che
offers "sheet|simulate" risefall help s
offers "$(echo "help|$verbs|--help|--version" | tr '|' '\n' | LC_ALL=C sort | paste -s -d '|')" risefall ""
offers "evening run.ini|morning.ini|other result|result" risefall run ""
offers "evening run.ini" risefall run e
offers "notes.txt" risefall run n
offers "--json" risefall run morning.ini --js
offers "other result|result" risefall run morning.ini --out ""
offers "result" risefall run morning.ini --out = r
offers "other result|result" risefall run morning.ini --out =
offers "result" risefall run morning.ini -o r
offers "" risefall run morning.ini --threads ""
offers "grid" risefall calibrate x.png --lines g
offers "grid|horizontal|vertical" risefall calibrate x.png --lines =
offers "" risefall calibrate x.png --spacing ""
offers "other result|result|stopwatch.csv" risefall audit ""
offers "recording.mkv|result" risefall check re
offers "bench.scene" risefall simulate be

complete -p risefall | grep -q -- '-F _risefall risefall'
count=$((count + 1))
[ $? -eq 0 ] && echo "ok $count - bash knows it" || { failures=$((failures + 1)) && echo "not ok $count - bash knows it"; }

# Every option that help shows is offered.
for verb in ${verbs//|/ }; do
    COMP_WORDS=(risefall "$verb" --) COMP_CWORD=2 COMPREPLY=()
    _risefall
    shown=$("$program" "$verb" --help | grep -o -- '^  [-a-z, ]*--[a-z-]*' | grep -o -- '--[a-z-]*' | LC_ALL=C sort -u | paste -s -d ' ')
    seen=$(printf '%s\n' "${COMPREPLY[@]}" | LC_ALL=C sort -u | paste -s -d ' ')
    count=$((count + 1))
    if [ -n "$shown" ] && [ "$seen" = "$shown" ]; then
        echo "ok $count - options of $verb"
    else
        failures=$((failures + 1))
        printf 'not ok %s - options of %s\n# offered %s\n# needed  %s\n' "$count" "$verb" "$seen" "$shown"
    fi
done
echo "1..$count"
[ "$failures" -eq 0 ]
