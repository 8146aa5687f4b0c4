#!/bin/sh
# Overruling in a real browser, from disk: two decisions are filled in as a person would, the file that the page saves is read
# by the program, and the next report has what came of it, its reason as text, and the file's entries to go on from.
#   review_in_browser.sh PROGRAM
# The page keeps its content policy; only the digest of the script that plays the person is added to it.
set -eu
browser=$(command -v chromium || command -v chromium-browser) || { echo "no chromium here: skipped"; exit 77; }
command -v openssl >/dev/null || { echo "no openssl here: skipped"; exit 77; }
program=$(realpath "$1")
here=$(cd "$(dirname "$0")/cli" && pwd)
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT INT TERM
. "$here/fixtures.sh"
mkdir "$work/bench" && cd "$work/bench"

fail() {
    echo "not ok: $1"
    exit 1
}
cat > "$work/person.js" <<'JS'
var kept;
URL.createObjectURL = function (blob) { kept = blob; return '#saved'; };
function give(name, value) {
  var field = document.getElementById('review-' + name);
  field.value = value;
  field.dispatchEvent(new Event('change', { bubbles: true }));
}
function decide(values) {
  Object.keys(values).forEach(function (name) { give(name, values[name]); });
  document.querySelector('#review-form button').click();
}
decide({ action: 'restore', droplet: '2', reason: 'x', name: 'x' });
var refused = document.getElementById('review-status').textContent;
decide({ action: 'set aside', droplet: '1', reason: '<img src=x onerror=alert(1)>; "quoted", ünd =1+1', name: '<\/script><b>A</b>' });
decide({ action: 'cut', droplet: '2', cut: '1.5', reason: 'focus jumps', name: 'B' });
document.getElementById('review-save').click();
kept.arrayBuffer().then(function (bytes) {
  var place = document.createElement('pre');
  place.id = 'saved';
  place.textContent = refused + '\n' + btoa(String.fromCharCode.apply(null, new Uint8Array(bytes)));
  document.body.append(place);
});
JS

# The page with the person in it.
play() { # report
    digest=$(printf '%s' "$(cat "$work/person.js")" | openssl dgst -sha256 -binary | base64)
    awk -v digest="$digest" -v person="$work/person.js" '
        { sub(/script-src /, "script-src \047sha256-" digest "\047 ") }
        /^<\/body>/ { printf "<script>"; line = ""; while ((getline next_line < person) > 0) { printf "%s%s", line, next_line; line = "\n" } print "</script>" }
        { print }' "$1" > "$work/played.html"
}
look() { # page
    "$browser" --headless --no-sandbox --disable-gpu --user-data-dir="$work/profile" --enable-logging=stderr \
        --virtual-time-budget=5000 --dump-dom "file://$1" > "$work/dom" 2> "$work/log"
    grep -q '</html>' "$work/dom" || fail 'the page did not load'
    ! grep -E 'CONSOLE|Refused|ERR_' "$work/log" || fail 'the console has errors'
}

measured_recording
play first/report.html
look "$work/played.html"
sed -n '/<pre id="saved">/,/<\/pre>/p' "$work/dom" | sed 's/.*<pre id="saved">//; s/<\/pre>.*//' > "$work/saved"
grep -q '^Droplet 2 is accepted already.$' "$work/saved" || fail 'restoring what is accepted was not refused'
tail -n 1 "$work/saved" | base64 -d > review.csv
[ "$(head -c 3 review.csv | od -An -tx1 | tr -d ' ')" = efbbbf ] || fail 'no byte-order mark for spreadsheets'
[ "$(wc -l < review.csv)" -eq 3 ] || fail 'not a header and two decisions'

"$program" run reviewed.ini --out second --quiet 2> "$work/notes" || [ $? -eq 3 ] || fail "refused: $(cat "$work/notes")"
[ ! -s "$work/notes" ] || fail "notes: $(cat "$work/notes")"
[ "$(grep -c '"outcome" : "honoured"' second/summary.json)" -eq 2 ] || fail 'not both decisions were honoured'
look "$PWD/second/report.html"
grep -q 'Reviewed by a person' "$work/dom" || fail 'the next report does not say that it was reviewed'
! grep -q '<img' "$work/dom" || fail 'a reason became markup'
[ "$(grep -c 'Take back: ' "$work/dom")" -ge 1 ] || fail 'the form does not start from the review'
[ "$(grep -o 'aria-label="Take back: ' "$work/dom" | wc -l)" -eq 2 ] || fail 'not both decisions are there to go on from'
grep -qF '&lt;img src=x onerror=alert(1)&gt;; "quoted", ünd =1+1' "$work/dom" || fail 'the reason is not as it was written'
echo "ok: two decisions saved, honoured and shown"
