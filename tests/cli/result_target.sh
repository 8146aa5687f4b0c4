#!/bin/sh
# What becomes of earlier results when the disk is full or read-only, when two runs want the same folder, and when Ctrl-C comes:
# result_target.sh PROGRAM; speaks TAP. Small disks need a mount of one's own; skipped where that isn't allowed.
set -u
program=$(realpath "$1")
work=$(mktemp -d)
here=$(cd "$(dirname "$0")" && pwd)
trap 'rm -rf "$work"' EXIT
. "$here/fixtures.sh"
cd "$work" || exit 1

count=0 failures=0
report() { # status, name
    count=$((count + 1))
    [ "$1" -eq 0 ] && echo "ok $count - $2" && return
    failures=$((failures + 1))
    echo "not ok $count - $2"
}

sums() { (cd "$1" && find . -type f -exec cksum {} + | sort); }
tables_of() { (cd "$1" && cksum ./*.csv ./*.json); }

recording && mkdir notes && cp recording.mkv reticle.png notes/ || exit 1
for version in a b; do
    { cat sheet.ini && printf '[notes]\nversion=%s\n' "$version"; } >"notes/$version.ini"
    "$program" run "notes/$version.ini" --out "whole-$version" --quiet || exit 1
    tables_of "whole-$version" >"$version.sums"
done

# A disk that holds one result and half of another.
cat >disk.sh <<'END'
mkdir disk && mount -t tmpfs -o size=$(($(du -sk whole-a | cut -f 1) * 3 / 2 + 16))k tmpfs disk || exit 77
cp -r whole-a disk/result && sums disk/result >before.sums
"$program" run notes/b.ini --out disk/result --quiet 2>full.err; full=$?
sums disk/result | cmp -s before.sums - && [ "$full" -eq 1 ] && [ "$(ls -A disk)" = result ] &&
    grep -q "can't be written: No space left on device; free some space or choose another --out; earlier results are untouched" full.err
report $? 'full disk: the earlier result stays, the message says why, nothing else is left'
mount -o remount,ro disk
: >notes/nothing.mkv && sed 's/^video=.*/video=nothing.mkv/' notes/b.ini >notes/c.ini
"$program" run notes/c.ini --out disk/result --quiet 2>read-only.err; read_only=$?
sums disk/result | cmp -s before.sums - && [ "$read_only" -eq 1 ] && grep -q "can't be written: Read-only file system" read-only.err
report $? 'read-only disk: refused before the recording is looked at'
"$program" run notes/c.ini --out disk/another/one --quiet 2>read-only.err; [ $? -eq 1 ] && grep -q "can't be written: Read-only file system" read-only.err
report $? 'read-only disk: a new folder is refused as well'
umount disk
echo "$count $failures" >disk.count
END
{
    echo "program=$program count=0 failures=0"
    sed -n '/^report()/,/^}/p; /^sums()/p' "$here/result_target.sh"
    cat disk.sh
} >in-mount.sh
# What is printed by unshare itself isn't TAP.
unshare --mount --map-root-user sh in-mount.sh 2>mount.err
if [ -f disk.count ]; then
    read -r count failures <disk.count
else
    for name in 'full disk' 'read-only disk' 'read-only disk, new folder'; do
        count=$((count + 1))
        echo "ok $count - $name # SKIP no small disk can be mounted here"
    done
fi

# Two at once.
"$program" run notes/a.ini --out both --quiet &
first=$!
"$program" run notes/b.ini --out both --quiet
second=$?
wait "$first" && [ "$second" -eq 0 ]
report $? 'two runs on one folder: both end well'
tables_of both >both.sums
cmp -s both.sums a.sums || cmp -s both.sums b.sums
report $? 'two runs on one folder: it holds one of the results, whole'
[ -z "$(ls -A | grep '^\.both')" ]
report $? 'two runs on one folder: no debris'

# Ctrl-C. How soon the end came is told, not judged: the machine may have other work.
footage long '20 s' && cp recording.mkv reticle.png notes/
start=$(date +%s%N)
"$program" run notes/a.ini --out whole-long --quiet
span=$((($(date +%s%N) - start) / 10000000))
cp -r whole-b held && tables_of held >held.sums
slowest=0
for part in 1 3 5 7 9; do
    wait_cs=$((span * part / 10))
    # A shell in the background has its children ignore Ctrl-C; this one doesn't.
    sh -c "trap - INT; exec '$program' run notes/a.ini --out held --quiet" 2>interrupted.err &
    run=$!
    sleep "$((wait_cs / 100)).$(printf '%02d' $((wait_cs % 100)))"
    kill -INT "$run" 2>/dev/null
    start=$(date +%s%N)
    wait "$run"
    status=$?
    took=$((($(date +%s%N) - start) / 1000000))
    tables_of held >seen.sums
    if [ "$status" -eq 0 ]; then
        tables_of whole-long | cmp -s - seen.sums
        report $? "Ctrl-C after $wait_cs of $span hundredths: not heard any more, or not yet: the new result, whole"
        rm -rf held && cp -r whole-b held
    else
        cmp -s held.sums seen.sums && grep -q '^risefall: stopped on request$' interrupted.err && [ -z "$(ls -A | grep '^\.held')" ]
        report $? "Ctrl-C after $wait_cs of $span hundredths: the earlier result, a message, no debris"
        sed 's/^/# /' interrupted.err
        [ "$took" -le "$slowest" ] || slowest=$took
    fi
done
echo "# Ctrl-C: the end came after $slowest ms at the latest"
echo "1..$count"
[ "$failures" -eq 0 ]
