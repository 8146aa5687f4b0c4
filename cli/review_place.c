#include "cli/review_place.h"

#include <math.h>

#include "cli/text_number.h"

/* What another frame rate or another linking may shift a place by; droplets that meet are nearer than that, and then
 * nobody can tell. */
static const double reach_s = 0.1, reach_px = 3;
/* Rows of one frame, or of one field of it. */
static const double same_instant_s = 1e-4;

/* Beyond this, farther from all others is no clearer. */
static const double clear_px = 15;
enum { LOOKS = 64 }; /* at a path, evenly spread */

/* ---- find ---- */

typedef struct {
    unsigned droplet;
    double away_s, away_px;
} Candidate;

static bool is_nearer(const Candidate *a, const Candidate *b)
{
    if (fabs(a->away_s - b->away_s) > same_instant_s) return a->away_s < b->away_s;
    return a->away_px < b->away_px;
}

static char *say_why(const RfReviewPlace *place, const Candidate *best, const Candidate *rival)
{
    GString *text = g_string_new(NULL);
    if (best->droplet)
        g_string_append_printf(text, "droplets %u and %u were both within 3 px of ",
                               MIN(best->droplet, rival->droplet), MAX(best->droplet, rival->droplet));
    else
        g_string_append(text, "no droplet was within 3 px of ");
    g_string_append(text, "x = ");
    rf_text_number_append_fixed(text, place->x_px, 1);
    g_string_append(text, ", y = ");
    rf_text_number_append_fixed(text, place->y_px, 1);
    g_string_append(text, " px at ");
    rf_text_number_append_fixed(text, place->time_s, 2);
    g_string_append(text, " s");
    return g_string_free(text, FALSE);
}

unsigned rf_review_place_find(const GArray *paths, const RfReviewPlace *place, char **why)
{
    Candidate best = {0, HUGE_VAL, HUGE_VAL},
              rival = best; /* the nearest, and the nearest of another droplet */
    for (guint i = 0; i < paths->len; i++) {
        const RfPathRow *row = &g_array_index(paths, RfPathRow, i);
        const Candidate one = {row->droplet, fabs(row->time_s - place->time_s),
                               hypot(row->x_px - place->x_px, row->y_px - place->y_px)};
        if (!(one.away_s <= reach_s && one.away_px <= reach_px)) continue;
        if (is_nearer(&one, &best)) {
            if (best.droplet != one.droplet) rival = best;
            best = one;
        } else if (one.droplet != best.droplet && is_nearer(&one, &rival)) {
            rival = one;
        }
    }
    const bool is_doubtful = rival.droplet != 0 && rival.away_s - best.away_s <= same_instant_s;
    *why = best.droplet == 0 || is_doubtful ? say_why(place, &best, &rival) : NULL;
    return is_doubtful ? 0 : best.droplet;
}

/* ---- sightings ---- */

static int by_time(const void *left, const void *right)
{
    const RfPathRow *a = *(const RfPathRow *const *)left, *b = *(const RfPathRow *const *)right;
    return (a->time_s > b->time_s) - (a->time_s < b->time_s);
}

static guint first_from(const GPtrArray *in_time, double time_s)
{
    guint low = 0, high = in_time->len;
    while (low < high) {
        const guint middle = low + (high - low) / 2;
        if (((const RfPathRow *)in_time->pdata[middle])->time_s < time_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

/* Distance to the nearest other droplet at that instant, at most clear_px. */
static double clearance_px(const GPtrArray *in_time, const RfPathRow *row)
{
    double nearest_px = clear_px;
    for (guint i = first_from(in_time, row->time_s - same_instant_s); i < in_time->len; i++) {
        const RfPathRow *other = in_time->pdata[i];
        if (other->time_s > row->time_s + same_instant_s) break;
        if (other->droplet != row->droplet)
            nearest_px = fmin(nearest_px, hypot(other->x_px - row->x_px, other->y_px - row->y_px));
    }
    return nearest_px;
}

/* Among equals the one nearest to the middle, where cuts and other settings are least likely to reach. */
static const RfPathRow *clearest(const GPtrArray *in_time, const RfPathRow *rows, guint n)
{
    const RfPathRow *best = NULL;
    double best_score = -1;
    const guint step = MAX(n / LOOKS, 1);
    for (guint i = (n / 2) % step; i < n; i += step) {
        if (!rows[i].seen) continue;
        const double off_middle = fabs(2.0 * i / n - 1);
        const double score = clearance_px(in_time, &rows[i]) - off_middle; /* worth a pixel at the very end */
        if (score > best_score) {
            best_score = score;
            best = &rows[i];
        }
    }
    return best ? best : rows;
}

GArray *rf_review_place_sightings(const GArray *paths)
{
    GArray *sightings = g_array_new(FALSE, TRUE, sizeof(RfReviewSighting));
    g_autoptr(GPtrArray) in_time = g_ptr_array_sized_new(paths->len + 1);
    for (guint i = 0; i < paths->len; i++) g_ptr_array_add(in_time, &g_array_index(paths, RfPathRow, i));
    g_ptr_array_sort(in_time, by_time);
    for (guint first = 0, end; first < paths->len; first = end) {
        const RfPathRow *rows = &g_array_index(paths, RfPathRow, first);
        for (end = first; end < paths->len && g_array_index(paths, RfPathRow, end).droplet == rows->droplet;)
            end++;
        const RfPathRow *at = clearest(in_time, rows, end - first);
        RfReviewSighting sighting = {
            {rows->droplet, at->time_s, at->x_px, at->y_px}, rows->time_s, rows[end - first - 1].time_s};
        g_array_append_val(sightings, sighting);
    }
    return sightings;
}
