#!/bin/sh
# The largest page that the program makes stays one that a browser opens at once and a mail carries: under 25 MB.
#   report_of_a_crowd.sh WRITE_CROWD_REPORT
set -eu
place=$(mktemp -d)
trap 'rm -rf "$place"' EXIT INT TERM
"$1" "$place/out"
bytes=$(wc -c <"$place/out/report.html")
rows=$(grep -c '<tr id="droplet-' "$place/out/report.html")
[ "$rows" -eq 200 ] || { echo "not ok: $rows droplets of 200 in the page"; exit 1; }
[ "$bytes" -lt 25000000 ] || { echo "not ok: $bytes bytes"; exit 1; }
echo "ok: 200 droplets and two hours take $bytes bytes"
