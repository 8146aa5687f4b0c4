#include "cli/simulate_record.h"

#include <math.h>

static const double absence_s = 1; /* longer than this: a new droplet when it returns */

static void free_life(void *data)
{
    RfLife *life = data;
    rf_simulate_motion_body_free(life->body);
    g_array_unref(life->seen);
    g_free(life);
}

RfRecord *rf_simulate_record_new(void)
{
    RfRecord *record = g_new0(RfRecord, 1);
    record->lives = g_ptr_array_new_with_free_func(free_life);
    record->droplets = g_array_new(FALSE, FALSE, sizeof(RfTrueDroplet));
    return record;
}

void rf_simulate_record_free(RfRecord *record)
{
    if (!record) return;
    g_ptr_array_unref(record->lives);
    g_array_unref(record->droplets);
    g_free(record);
}

RfLife *rf_simulate_record_add(RfRecord *record, RfBody *body)
{
    RfLife *life = g_new0(RfLife, 1);
    life->body = body;
    life->seen = g_array_new(FALSE, FALSE, sizeof(RfSeenAt));
    g_ptr_array_add(record->lives, life);
    return life;
}

static void cut_life(RfRecord *record, unsigned number)
{
    const RfLife *life = g_ptr_array_index(record->lives, number);
    RfTrueDroplet droplet = {.life = number};
    double in_view_s = 0; /* when it was last in view */
    for (unsigned i = 0; i < life->seen->len; i++) {
        const RfSeenAt *at = &g_array_index(life->seen, RfSeenAt, i);
        if (!at->is_in_view) continue;
        if (droplet.frames > 0 && at->time_s - in_view_s > absence_s) {
            g_array_append_val(record->droplets, droplet);
            droplet.frames = 0;
        }
        in_view_s = at->time_s;
        if (!at->is_visible) continue;
        if (droplet.frames == 0) droplet.first = i;
        droplet.last = i;
        droplet.frames++;
    }
    if (droplet.frames > 0) g_array_append_val(record->droplets, droplet);
}

static double start_s(const RfRecord *record, const RfTrueDroplet *droplet)
{
    return g_array_index(rf_simulate_record_life(record, droplet)->seen, RfSeenAt, droplet->first).time_s;
}

static int by_start(const void *a, const void *b, void *record)
{
    const RfTrueDroplet *left = a, *right = b;
    double left_s = start_s(record, left), right_s = start_s(record, right);
    if (left_s != right_s) return left_s < right_s ? -1 : 1;
    return left->life < right->life ? -1 : left->life > right->life;
}

void rf_simulate_record_cut(RfRecord *record)
{
    g_array_set_size(record->droplets, 0);
    for (unsigned i = 0; i < record->lives->len; i++) cut_life(record, i);
    g_array_sort_with_data(record->droplets, by_start, record);
    for (unsigned i = 0; i < record->droplets->len; i++)
        g_array_index(record->droplets, RfTrueDroplet, i).number = i + 1;
}

const RfLife *rf_simulate_record_life(const RfRecord *record, const RfTrueDroplet *droplet)
{
    return g_ptr_array_index(record->lives, droplet->life);
}

const RfSeenAt *rf_simulate_record_at(const RfRecord *record, const RfTrueDroplet *droplet, double time_s)
{
    const GArray *seen = rf_simulate_record_life(record, droplet)->seen;
    unsigned low = droplet->first, high = droplet->last;
    while (low < high) {
        unsigned middle = (low + high) / 2;
        if (g_array_index(seen, RfSeenAt, middle).time_s < time_s)
            low = middle + 1;
        else
            high = middle;
    }
    const RfSeenAt *at = &g_array_index(seen, RfSeenAt, low);
    bool is_near = fabs(at->time_s - time_s) <= 1.5 * record->exposure_interval_s;
    return is_near && at->is_visible ? at : NULL;
}
