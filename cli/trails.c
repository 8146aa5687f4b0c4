#include "cli/trails.h"

#include "cli/results.h"

static RfSample sample_of(const RfPathRow *row)
{
    return (RfSample){
        .time_s = row->time_s,
        .fall_m = row->y_mm * 1e-3,
        .drift_m = row->x_mm * 1e-3,
        .u_fall_m = row->u_y_mm * 1e-3,
        .u_drift_m = row->u_x_mm * 1e-3,
    };
}

static size_t count_droplets(const GArray *rows)
{
    size_t n = 0;
    for (guint i = 0; i < rows->len; i++)
        n += i == 0 ||
             g_array_index(rows, RfPathRow, i).droplet != g_array_index(rows, RfPathRow, i - 1).droplet;
    return n;
}

RfTrailSet *rf_trails_new(const GArray *rows)
{
    RfTrailSet *set = g_new0(RfTrailSet, 1);
    set->samples = g_new(RfSample, rows->len + 1);
    set->trails = g_new0(RfTrail, count_droplets(rows) + 1);
    size_t samples = 0;
    for (guint i = 0; i < rows->len; i++) {
        const RfPathRow *row = &g_array_index(rows, RfPathRow, i);
        if (i == 0 || row->droplet != g_array_index(rows, RfPathRow, i - 1).droplet)
            set->trails[set->n++] = (RfTrail){.droplet = row->droplet, .samples = set->samples + samples};
        if (!row->seen) continue;
        set->samples[samples++] = sample_of(row);
        set->trails[set->n - 1].n++;
    }
    return set;
}

void rf_trails_free(RfTrailSet *trails)
{
    if (!trails) return;
    g_free(trails->trails);
    g_free(trails->samples);
    g_free(trails);
}

void rf_trails_cut(GArray *rows, unsigned droplet, double time_s, unsigned as)
{
    guint first = 0, end;
    while (first < rows->len && (g_array_index(rows, RfPathRow, first).droplet != droplet ||
                                 g_array_index(rows, RfPathRow, first).time_s < time_s))
        first++;
    for (end = first; end < rows->len && g_array_index(rows, RfPathRow, end).droplet == droplet; end++) {
        RfPathRow row = g_array_index(rows, RfPathRow, end);
        row.droplet = as;
        g_array_append_val(rows, row);
    }
    if (end > first) g_array_remove_range(rows, first, end - first);
}
