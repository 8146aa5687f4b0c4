# Words for the setup lines of the cases: files that are what they should be, and files that aren't. Sourced by
# run_cases.sh, which sets $program, $here and $work; each word works in the current folder.

scene_text() { # duration, height (default 120), lines of the reticle (default grid)
    printf '%s\n' '[picture]' 'width=160' "height=${2:-120}" 'frame_rate=30 Hz' "duration=$1" 'px_per_mm=400' 'seed=7' \
        '[reticle]' 'spacing=0.1000(2) mm' "lines=${3:-grid}" 'still=yes' '[droplets]' 'count=2' \
        '[field]' 'off=0.8..1 s' 'on=0.8..1 s' '[video]' 'codec=ffv1'
}

# Footage of a scene, made once for all cases of a file.
footage() { # name, then as scene_text
    [ -d "$work/$1" ] || {
        scene_text "$2" "${3:-}" "${4:-}" >"$work/$1.scene"
        "$program" simulate "$work/$1.scene" --out "$work/$1" --quiet || return 1
    }
    cp "$work/$1"/* .
}

# recording.mkv, reticle.png, sheet.ini: a run of 3 s that nothing is wrong with.
recording() { footage recording '3 s'; }

# The sheet of `recording`, edited.
sheet() {
    recording && sed "$1" sheet.ini >edited.ini && mv edited.ini sheet.ini
}

# 2 s of silence: a well-made file without pictures.
wave() {
    printf 'RIFF\244\076\000\000WAVEfmt \020\000\000\000\001\000\001\000\100\037\000\000\200\076\000\000\002\000\020\000data\200\076\000\000'
    head -c 16000 /dev/zero
}

columns() { # longest line of a file, in characters
    awk '{ if (length($0) > longest) longest = length($0) } END { print longest + 0 }' "$1"
}

# Help of every command that the overview lists.
fits_every_help() {
    "$program" --help | sed -n 's/^  \([a-z]*\) .*/\1/p' >verbs
    [ "$(wc -l <verbs)" -ge 5 ] || return 1
    while read -r verb; do
        "$program" "$verb" --help >help || return 1
        [ "$(columns help)" -le 80 ] || { echo "$verb: $(columns help) columns" && return 1; }
        [ "$(wc -l <help)" -le 24 ] || { echo "$verb: $(wc -l <help) lines" && return 1; }
        grep -q "^ *risefall $verb " help && grep -q '^Example:' help || { echo "$verb: no example" && return 1; }
    done <verbs
}

# Every row of a droplets.csv has a radius with its sigma, no charge, and a reason.
radii_without_charges() {
    awk -F, 'NR == 1 { for (i = 1; i <= NF; i++) at[$i] = i; next }
             $(at["radius_um"]) <= 0 || $(at["u_radius_um"]) <= 0 || $(at["charge_C"]) != "" || $(at["reason"]) == "" { bad = 1 }
             END { exit bad || NR < 2 }' "$1"
}

# A result folder as a run leaves it, as far as pooling reads it: 24 accepted charges on multiples of `unit` (in e) with
# 0.03 e of their own, a gap of 6.00(2) mm by the name `gap` (null: not shared), made from a recording with digest `name`.
invented_result() { # name, unit (default 1), gap (default null), further settings (JSON objects, each with a comma behind)
    mkdir "$1"
    printf '%s\n' '{ "program": "risefall", "program_version": "0.1.0", "measured": true, "verdict": "Fine.",' \
        "\"sheet\": \"$1.ini\", \"inputs\": [{\"role\": \"recording\", \"path\": \"$1.mkv\", \"sha256\": \"$1\"}]," \
        "\"settings\": [${4:-} {\"group\": \"analysis\", \"key\": \"slip\", \"value\": \"kim-2005\"}]," \
        '"common_inputs": [' \
        "{\"input\": \"plate_gap\", \"value\": 0.006, \"u\": 2e-05, \"unit\": \"m\", \"shared\": ${3:-null}, \"law\": false}," \
        '{"input": "slip", "value": 1.0, "u": 0.02, "unit": "1", "shared": "kim-2005", "law": true}] }' >"$1/summary.json"
    awk -v unit="${2:-1}" -v droplets="$1/droplets.csv" -v influences="$1/influences.csv" 'BEGIN {
        print "droplet,spell,start_s,end_s,radius_um,u_radius_um,charge_C,u_charge_C,u_random_C,verdict,reason" >droplets
        print "droplet,spell,input,charge_C" >influences
        for (i = 1; i <= 24; i++) {
            multiple = (i % 7 + 1) * (i % 2 ? 1 : -1)
            charge = 1.602176634e-19 * (multiple * unit + 0.03 * sin(37 * i + 100 * unit))
            printf "%d,1,0,20,0.6,0.01,%.9e,9e-21,4.8e-21,accepted,\n", i, charge >droplets
            printf "%d,1,plate_gap,%.6e\n%d,1,slip,%.6e\n", i, charge / 300, i, charge / 500 >influences
        }
    }'
}

# The value of a key of a JSON file, one key a line.
value_in() { sed -n "s/^ *\"$2\" *: *\"\{0,1\}\([^\",]*\)\"\{0,1\},*$/\1/p" "$1" | head -n 1; }

# A review of the footage of `recording`, from its first report: lines of `ACTION DROPLET [CUT_S | OTHER]`. Droplets are pointed
# at as the report's own form points at them.
place_of() { # report, droplet
    sed -n "s/.*<option value=\"$2\" data-number=\"[0-9]*\" data-time-s=\"\([^\"]*\)\" data-x-px=\"\([^\"]*\)\" data-y-px=\"\([^\"]*\)\".*/\1,\2,\3/p" "$1/report.html"
}
review() { # result folder, action, droplet, [cut_s]
    [ -s review.csv ] || echo 'action,droplet,time_s,x_px,y_px,cut_s,reason,name,date' >review.csv
    printf '%s,%s,%s,%s,"it looked, well, odd",A. Example,2026-05-04\n' "$2" "$3" "$(place_of "$1" "$3")" "${4:-}" >>review.csv
}

# Footage, measured once; its sheet then names review.csv.
measured_recording() {
    recording && { [ -d "$work/measured" ] || "$program" run sheet.ini --out "$work/measured" --quiet; } &&
        cp -r "$work/measured" first && sed 's/^video=.*/&\nreview=review.csv/' sheet.ini >reviewed.ini
}

# One cell of a table: file, droplet, column.
cell() {
    awk -F, -v droplet="$2" -v column="$3" 'NR == 1 { for (i = 1; i <= NF; i++) at[$i] = i; next } $1 == droplet { print $(at[column]) }' "$1"
}

# A result of `recording` in the folder earlier, made once for all cases of a file, with its paths.csv and scale.json here too.
result() {
    recording && { [ -d "$work/earlier" ] || "$program" run sheet.ini --out "$work/earlier" --quiet; } &&
        cp -r "$work/earlier" . && cp earlier/paths.csv earlier/scale.json .
}

# The voltage log of the next run: what printf makes of the arguments.
log_of() {
    sheet 's/^voltage=.*/&\nlog=volts.csv/' && printf "$@" >volts.csv
}

# The same for a stopwatch record.
timings_of() {
    sheet 's/^video=.*/&\ntimings=watch.csv/' && printf "$@" >watch.csv
}
