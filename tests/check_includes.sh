#!/bin/sh
# The dependency rule, read off the sources: cli -> physics, calib, tracker; the three rooms share only calib/units.h;
# two files know libav (reading, writing), one knows OpenCV.
set -u
cd "$1" || exit 2
bad=0
complain() { echo "$1"; bad=1; }

for room in tracker calib physics; do
    found=$(grep -nE '#include "(tracker|calib|physics|cli)/' "$room"/*.c "$room"/*.h "$room"/*.cpp 2>/dev/null |
            grep -vE "#include \"($room/|calib/units\.h)")
    [ -z "$found" ] || complain "$room/ includes from another room:
$found"
done

libav=$(grep -lE '#include [<"]lib(av|sw|postproc)[a-z]*/' -r tracker calib physics cli | sort | tr '\n' ' ')
[ "$libav" = "tracker/libav.c tracker/libav_write.c " ] ||
    complain "libav belongs in tracker/libav.c and tracker/libav_write.c alone; found in: $libav"

opencv=$(grep -lE '#include <opencv' -r tracker calib physics cli | sort)
[ "$opencv" = "tracker/spot_detector_opencv.cpp" ] ||
    complain "OpenCV belongs in tracker/spot_detector_opencv.cpp alone; found in: $opencv"

headers=$(ls tracker/*.h calib/*.h physics/*.h cli/*.h)
for header in $headers; do
    grep -q '#pragma once' "$header" || complain "$header lacks #pragma once"
done
exit $bad
