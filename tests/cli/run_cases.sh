#!/bin/sh
# Calls risefall as a person would and looks at what comes back: run_cases.sh PROGRAM FILE.cases; speaks TAP.
#
# A case is a paragraph of lines `word: value`, run in an empty folder of its own:
#   case     what it shows; begins a case
#   setup    shell; fixtures.sh has the words for recordings, sheets and files that aren't what they seem
#   run      the command line after `risefall`
#   exit     status that must come
#   stderr   a line that must come, in order, nothing else; * stands for anything. No such line: stderr isn't looked at
#   stdout   the same
#   present  a file that must be there afterwards
#   check    shell that must succeed afterwards; $before is the folder as it was, $stdout and $stderr are files
# Whatever ends with 1 or 2 must besides say why in one to three lines and leave the folder as it was.
set -u
program=$(realpath "$1") cases=$(realpath "$2")
here=$(cd "$(dirname "$0")" && pwd) samples=$(cd "$(dirname "$0")/../../sample-synthetic" && pwd)
work=$(mktemp -d)
trap 'chmod -R u+w "$work"; rm -rf "$work"' EXIT
stdout=$work/stdout stderr=$work/stderr before=$work/before
count=0 failures=0 why="" name=""
. "$here/fixtures.sh"

complain() { why="$why# $*
"; }

# What is in the folder: names, kinds, sizes and contents.
picture_of() { (cd "$1" && find . -type f -exec cksum {} + | sort && find . ! -type f | sort); }

# Do the lines of a file match these patterns, one each?
match_lines() { # what, patterns, file
    rest=$2
    while IFS= read -r line || [ -n "$line" ]; do
        pattern=$(printf '%s' "$rest" | head -n 1 | sed 's/[][?\\]/\\&/g')
        rest=$(printf '%s' "$rest" | tail -n +2)
        # shellcheck disable=SC2254 # a pattern on purpose
        case $line in
        $pattern) ;;
        *) complain "$1: seen   $line" && complain "$1: needed $pattern" ;;
        esac
    done <"$3"
    [ -z "$rest" ] || complain "$1: missing $rest"
}

judge_refusal() {
    lines=$(wc -l <"$stderr")
    grep -q '^usage: ' "$stderr" || { [ "$lines" -ge 1 ] && [ "$lines" -le 3 ]; } || complain "$lines lines on stderr, 1 to 3 needed"
    head -n 1 "$stderr" | grep -q -e '^risefall: ' -e '^usage: risefall ' || complain "stderr begins with another word than risefall"
    [ ! -s "$stdout" ] || complain "something on stdout"
    picture_of "$folder" | cmp -s "$before" - || complain "the folder isn't as it was"
}

begin_case() {
    name=$1 run="" status=0 errors="" outputs="" looks_at_errors="" looks_at_outputs="" afterwards=true
    folder=$work/case
    chmod -R u+w "$folder" 2>/dev/null
    rm -rf "$folder"
    mkdir "$folder"
}

end_case() {
    [ -n "$name" ] || return 0
    why=""
    picture_of "$folder" >"$before"
    (cd "$folder" && eval "exec \"$program\" $run" </dev/null >"$stdout" 2>"$stderr")
    seen=$?
    [ "$seen" -eq "$status" ] || complain "exit $seen, needed $status"
    case $seen in 1 | 2) judge_refusal ;; esac
    [ -z "$looks_at_errors" ] || match_lines stderr "$errors" "$stderr"
    [ -z "$looks_at_outputs" ] || match_lines stdout "$outputs" "$stdout"
    (cd "$folder" && eval "$afterwards") >"$work/check" 2>&1 || complain "check failed: $(tr '\n' ' ' <"$work/check")"
    count=$((count + 1))
    if [ -z "$why" ]; then
        echo "ok $count - $name"
    else
        failures=$((failures + 1))
        echo "not ok $count - $name"
        printf '%s' "$why"
        sed 's/^/# stderr: /' "$stderr" | head -n 20
    fi
    name=""
}

while IFS= read -r entry || [ -n "$entry" ]; do
    word=${entry%%:*}
    value=${entry#*:}
    value=${value# }
    case $entry in "#"*) continue ;; esac
    case $word in
    case) end_case && begin_case "$value" ;;
    setup) (cd "$folder" && eval "$value") >&2 || { echo "Bail out! setup of '$name': $value" && exit 1; } ;;
    run) run=$value ;;
    exit) status=$value ;;
    stderr) looks_at_errors=1 && [ "$value" = "" ] || errors="$errors$value
" ;;
    stdout) looks_at_outputs=1 && [ "$value" = "" ] || outputs="$outputs$value
" ;;
    present) afterwards="$afterwards && test -e '$value'" ;;
    check) afterwards="$afterwards && $value" ;;
    "") ;;
    *) echo "Bail out! $cases: no such word: $entry" && exit 1 ;;
    esac
done <"$cases"
end_case
echo "1..$count"
[ "$failures" -eq 0 ]
