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
