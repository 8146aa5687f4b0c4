#!/bin/sh
# The installed manual: a page for every command that the overview lists, and each rendered without a warning.
# manual_pages.sh PROGRAM BUILD; speaks TAP; what judges roff may be missing.
set -u
program=$(realpath "$1") build=$(realpath "$2")
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
count=0 failures=0

result() { # status, what
    count=$((count + 1))
    [ "$1" -eq 0 ] && echo "ok $count - $2" && return
    failures=$((failures + 1))
    echo "not ok $count - $2"
    sed 's/^/# /' "$work/complaints"
}

skip() { count=$((count + 1)) && echo "ok $count - $1 # SKIP not installed"; }

DESTDIR=$work/root meson install -C "$build" --no-rebuild --quiet >"$work/complaints" 2>&1
result $? "installs"
find "$work/root" -type f >"$work/files"

missing=0
for page in risefall.1 risefall-sheet.5 $("$program" --help | sed -n 's/^  \([a-z]*\) .*/risefall-\1.1/p'); do
    grep -q "/man/man./$page\$" "$work/files" || { echo "$page" && missing=1; }
done >"$work/complaints"
result $missing "every command has a page"

for file in bin/risefall doc/risefall/README.md doc/risefall/LICENSE bash-completion/completions/risefall.bash; do
    grep -q "/$file\$" "$work/files" || { echo "$file" && missing=1; }
done >"$work/complaints"
result $missing "program, documents and completion are in their places"

pages=$(grep '/man/man' "$work/files")
if man -l "$(echo "$pages" | head -n 1)" >/dev/null 2>&1; then
    for page in $pages; do
        MANWIDTH=80 man --warnings -E UTF-8 -l "$page" 2>&1 >"$work/rendered" | sed "s|^|$page: |"
        [ -s "$work/rendered" ] || echo "$page: nothing"
    done >"$work/complaints"
    [ ! -s "$work/complaints" ]
    result $? "man renders every page without a warning"
else
    skip "man renders every page without a warning"
fi

if command -v mandoc >/dev/null; then
    # shellcheck disable=SC2086 # one word a page
    mandoc -T lint -W warning $pages >"$work/complaints"
    result $? "mandoc finds nothing wrong"
else
    skip "mandoc finds nothing wrong"
fi

"$program" help sheet >"$work/sheet" 2>"$work/complaints"
grep -q '^ *plate_gap ' "$work/sheet" && [ "$(awk 'length($0) > 80' "$work/sheet" | wc -l)" -eq 0 ]
result $? "the sheet's keys can be read on the terminal"

echo "1..$count"
[ "$failures" -eq 0 ]
