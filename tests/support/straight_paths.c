#include "tests/support/straight_paths.h"

GArray *straight_paths_new(void)
{
    return g_array_new(FALSE, TRUE, sizeof(RfPathRow));
}

void straight_paths_add(GArray *rows, unsigned droplet, double start_s, double end_s, double x_px,
                        double y_px, double speed_px_s)
{
    const int first = (int)(start_s * 30 + 0.5), last = (int)(end_s * 30 + 0.5);
    for (int frame = first; frame <= last; frame++) {
        const RfPathRow row = {.droplet = droplet,
                               .frame = frame,
                               .seen = true,
                               .time_s = frame / 30.0,
                               .x_px = x_px + speed_px_s * (frame - first) / 30.0,
                               .y_px = y_px};
        g_array_append_val(rows, row);
    }
}
