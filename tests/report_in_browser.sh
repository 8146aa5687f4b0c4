#!/bin/sh
# The report in a real browser, from disk: its script runs under its own content policy, nothing is logged as an error, a
# droplet asked for is marked in view, figures and tables, and a label that carries a script stays text.
#   report_in_browser.sh WRITE_SAMPLE_REPORT
set -eu
browser=$(command -v chromium || command -v chromium-browser) || { echo "no chromium here: skipped"; exit 77; }
place=$(mktemp -d)
trap 'rm -rf "$place"' EXIT INT TERM
"$1" "$place/out"

page() { # fragment
    "$browser" --headless --no-sandbox --disable-gpu --user-data-dir="$place/profile" --enable-logging=stderr --dump-dom \
        "file://$place/out/report.html$1" > "$place/dom" 2> "$place/log"
}
fail() {
    echo "not ok: $1"
    exit 1
}
marked() {
    grep -cE 'class="[^"]*is-chosen[^"]*"' "$place/dom" || true
}

page ''
grep -q '</html>' "$place/dom" || fail 'the page did not load'
! grep -E 'CONSOLE|Refused|ERR_' "$place/log" || fail 'the console has errors'
[ "$(marked)" -eq 0 ] || fail 'something is marked before anything was chosen'
! grep -q '<script>alert' "$place/dom" || fail 'a label became a script'

page '#droplet-4'
all=$(grep -c 'data-droplet="4"' "$place/dom")
[ "$all" -ge 4 ] || fail "droplet 4 is in $all lines only"
[ "$(marked)" -eq "$all" ] || fail "droplet 4 is marked in $(marked) lines of $all"
grep -q 'Droplet 4 is marked' "$place/dom" || fail 'nobody says that droplet 4 is marked'
echo "ok: droplet 4 marked in all $all places"

# Two packages from the npm registry, kept beside the build from one run to the next.
modules=$(cd "$(dirname "$1")" && pwd)/npm
command -v node >/dev/null && command -v npm >/dev/null || { echo "no node here: not used as a person would"; exit 0; }
[ -d "$modules/node_modules/axe-core" ] ||
    npm install --silent --no-audit --no-fund --prefix "$modules" playwright-core@1.65.1 axe-core@4.14.1 ||
    { echo "no packages from npm: not used as a person would"; exit 0; }
node "$(dirname "$0")/report_in_browser.mjs" "$place/out/report.html" "$browser" "$modules"
