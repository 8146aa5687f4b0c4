#!/bin/sh
# The workflow of cli/batch on a Slurm of its own: batch_on_slurm.sh PROGRAM; speaks TAP. slurmctld, two slurmd and munged run on
# the loopback, with everything they need in one folder; a Slurm that is there already isn't touched. 24 short recordings, one
# broken; a job is killed midway and queued again; the pool must be that of `--cores 2` to the byte. Skipped unless
# RISEFALL_BATCH=1 asks for it, where Slurm, munge or Snakemake isn't installed, or the user isn't root (slurmd needs that).
set -u
program=$(realpath "$1")
batch=$(cd "$(dirname "$0")/../cli/batch" && pwd)
[ "${RISEFALL_BATCH:-}" ] || { echo '1..0 # SKIP takes minutes: RISEFALL_BATCH=1 asks for it' && exit 0; }
for needed in snakemake slurmctld slurmd munged sbatch scontrol; do
    command -v $needed >/dev/null || { echo "1..0 # SKIP $needed isn't installed" && exit 0; }
done
[ "$(id -u)" -eq 0 ] || { echo '1..0 # SKIP slurmd needs root' && exit 0; }
work=$(mktemp -d)
count=0 failures=0 daemons=""

end() {
    for pid in $daemons; do kill "$pid" 2>/dev/null; done
    sleep 2
    for pid in $daemons; do kill -9 "$pid" 2>/dev/null; done
    rm -rf "$work"
}
trap end EXIT
trap 'exit 1' INT TERM

told() { # status, name
    count=$((count + 1))
    [ "$1" -eq 0 ] && echo "ok $count - $2" && return
    failures=$((failures + 1))
    echo "not ok $count - $2"
}

until_true() { # seconds, command
    left=$1
    shift
    until "$@" >/dev/null 2>&1; do
        left=$((left - 1))
        [ "$left" -gt 0 ] || return 1
        sleep 1
    done
}

# ---- a Slurm of our own ----

export SLURM_CONF=$work/slurm.conf USER=root
port=$((20000 + $$ % 20000))
host=$(hostname -s)
mkdir -m 755 "$work/munge" "$work/state" "$work/spool-left" "$work/spool-right"
chmod 755 "$work"
head -c 1024 /dev/urandom >"$work/munge/key"
chmod 400 "$work/munge/key"
cat >"$SLURM_CONF" <<CONF
ClusterName=loopback
SlurmctldHost=$host(127.0.0.1)
SlurmUser=root
SlurmdUser=root
AuthType=auth/munge
AuthInfo=socket=$work/munge/socket
SlurmctldPort=$port
SlurmctldPidFile=$work/slurmctld.pid
SlurmctldLogFile=$work/slurmctld.log
StateSaveLocation=$work/state
SlurmdPidFile=$work/slurmd-%n.pid
SlurmdLogFile=$work/slurmd-%n.log
SlurmdSpoolDir=$work/spool-%n
ProctrackType=proctrack/linuxproc
TaskPlugin=task/none
JobAcctGatherType=jobacct_gather/none
SelectType=select/cons_tres
SelectTypeParameters=CR_Core
SchedulerParameters=batch_sched_delay=1,sched_interval=2
MinJobAge=6000
KillWait=3
ReturnToService=2
SlurmdParameters=config_overrides
NodeName=left NodeHostname=$host NodeAddr=127.0.0.1 Port=$((port + 1)) CPUs=1 RealMemory=4000
NodeName=right NodeHostname=$host NodeAddr=127.0.0.1 Port=$((port + 2)) CPUs=1 RealMemory=4000
PartitionName=bench Nodes=left,right Default=YES MaxTime=INFINITE State=UP
CONF

munged --foreground --force --key-file "$work/munge/key" --socket "$work/munge/socket" --pid-file "$work/munge/pid" \
    --seed-file "$work/munge/seed" --log-file "$work/munge/log" >/dev/null 2>&1 &
daemons="$daemons $!"
until_true 20 test -S "$work/munge/socket"
slurmctld -D -i >"$work/slurmctld.out" 2>&1 &
daemons="$daemons $!"
for node in left right; do
    slurmd -D -N $node >"$work/slurmd-$node.out" 2>&1 &
    daemons="$daemons $!"
done
both_idle() { [ "$(sinfo -h -o '%t %D')" = 'idle 2' ]; }
until_true 60 both_idle
told $? "two nodes are up: $(sinfo -h -o '%N %t' | tr '\n' ' ')"
[ "$failures" -eq 0 ] || {
    tail -n 5 "$work"/*.log "$work"/*.out | sed 's/^/# /'
    echo "1..$count"
    exit 1
}

# ---- 24 recordings, one of them broken ----

cd "$work" || exit 1
mkdir sheets
for day in $(seq -w 1 24); do
    printf '%s\n' '[picture]' 'width=192' 'height=160' 'frame_rate=30 Hz' 'duration=6 s' 'px_per_mm=420' "seed=$day" '[reticle]' \
        'spacing=0.1000(2) mm' 'lines=grid' 'still=yes' '[supply]' 'voltage=400.0(4) V' 'states=off,top+,top-' '[droplets]' \
        'count=5' 'least_units=1' 'most_units=4' 'sign=both' 'radius=0.40..0.60 um' '[field]' 'off=0.8..1 s' \
        'on=0.4..0.5 s' '[video]' 'codec=ffv1' >scene
    "$program" simulate scene --out "film-$day" --quiet || exit 1
    sed "s#\(video\|image\)=#\1=../film-$day/#" "film-$day/sheet.ini" >"sheets/day-$day.ini"
    printf '[shared]\nplate_gap=gap-march\ndensity=bottle-7\n' >>"sheets/day-$day.ini"
done
: >film-13/recording.mkv

# ---- on the cluster, a job killed midway ----

# Slow enough at its first start that the job can be caught while it works; at the second it isn't.
cat >slow <<'SLOW'
#!/bin/sh
case "$*" in
run*day-07*) [ -e "$SLOW_MARK" ] || { : >"$SLOW_MARK" && sleep 300; } ;;
esac
exec "$PROGRAM" "$@"
SLOW
chmod 755 slow
export SLOW_MARK=$work/caught PROGRAM=$program
workflow() { # out, further arguments
    out=$1
    shift
    snakemake -s "$batch/Snakefile" "$@" --config sheets='sheets/*.ini' "out=$out" "risefall=$work/slow"
}

workflow slurm --profile "$batch/slurm" --jobs 24 >slurm.log 2>&1 &
running=$!
caught_or_over() { [ -e "$SLOW_MARK" ] || ! kill -0 $running; }
until_true 600 caught_or_over
job=$(sed -n '/wildcards: name=day-07/,/Submitted\|submitted/s/.*SLURM jobid \([0-9]*\).*/\1/p' slurm.log | head -n 1)
sleep 2
[ -n "$job" ] && scontrol requeue "$job"
told $? "job $job is killed while it works, and queued again"
wait $running
status=$?
told $status "the workflow ends well on Slurm"
[ $status -eq 0 ] || tail -n 30 slurm.log | sed 's/^/# /'
scontrol show job "$job" | grep -q 'Restarts=1 '
told $? 'that job was started twice'
[ "$(scontrol -o show jobs | grep -c 'JobState=COMPLETED')" -eq 24 ]
told $? 'every recording was a job of Slurm'
[ "$(scontrol -o show jobs | sed -n 's/.* NodeList=\([a-z]*\) .*/\1/p' | sort -u | wc -l)" -eq 2 ]
told $? 'both nodes had work'
grep -q '^no result: day-13: .*film-13/recording.mkv' slurm.log
told $? 'the broken recording is named'
grep -q '^day-13,failed,' slurm/pool/recordings.csv && [ "$(grep -c . slurm/pool/recordings.csv)" -eq 25 ]
told $? 'the pool lists it beside the 23 others'

# ---- the same on one machine ----

workflow local --profile "$batch/here" --cores 2 >local.log 2>&1
told $? 'the workflow ends well with --cores 2'
for file in pool.json recordings.csv droplets.csv measurements.csv; do
    sed 's#"slurm/#"local/#' "slurm/pool/$file" | cmp - "local/pool/$file" >&2
    told $? "$file is the same to the byte"
done

# ---- once more ----

workflow local --profile "$batch/here" --cores 2 >again.log 2>&1
grep -q 'Nothing to be done' again.log
told $? 'a rerun has nothing to do'
echo '# a remark' >>sheets/day-03.ini
workflow local --profile "$batch/here" --cores 2 >changed.log 2>&1
[ "$(grep -c '^rule measure' changed.log)" -eq 1 ] && grep -q 'name=day-03' changed.log && grep -q '^localrule pool' changed.log
told $? 'a rerun does only what changed'

echo "1..$count"
[ "$failures" -eq 0 ]
