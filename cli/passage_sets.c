#include "cli/passage_sets.h"

#include <math.h>

/* Divisions count in thousandths; a record with more kinds of timing than this is no record. */
enum { MOST_SETS = 400 };
static const double grain = 1e-3, whole_within = 0.02, least_scatter = 0.05;

struct RfPassageSets {
    GHashTable *sets; /* int64_t * -> RfPassageSet * */
    double step_mm;
};

static int64_t key_of(double divisions, bool is_rise)
{
    int64_t thousandths = llround(divisions / grain);
    return is_rise ? -thousandths : thousandths;
}

static void set_free(void *item)
{
    RfPassageSet *set = item;
    g_array_unref(set->passages);
    g_array_unref(set->typical);
    g_free(set);
}

/* ---- one droplet's passages together ---- */

static bool belongs(const RfPassage *passage, unsigned course, double sign)
{
    return passage->course == course && passage->switches == 0 && passage->is_first &&
           fabs(passage->voltage_sign - sign) < 0.5;
}

static void add_typical(RfPassageSet *set, unsigned course, double sign)
{
    double n = 0, sum = 0, squares = 0;
    for (guint i = 0; i < set->passages->len; i++) {
        const RfPassage *passage = &g_array_index(set->passages, RfPassage, i);
        double took_s = passage->end_s - passage->start_s;
        if (!belongs(passage, course, sign)) continue;
        n++;
        sum += took_s;
        squares += took_s * took_s;
    }
    if (n < 1) return;
    double mean_s = sum / n, variance = n > 1 ? fmax(squares - n * mean_s * mean_s, 0) / (n - 1) : 0;
    double floor_s = least_scatter * mean_s; /* few passages tell little of their scatter */
    RfTypicalPassage typical = {course, {mean_s, sqrt(variance * (1 + 1 / n) + floor_s * floor_s)}, NULL};
    for (guint i = 0; i < set->passages->len; i++) {
        const RfPassage *passage = &g_array_index(set->passages, RfPassage, i);
        if (belongs(passage, course, sign) &&
            (!typical.nearest || fabs(passage->end_s - passage->start_s - mean_s) <
                                     fabs(typical.nearest->end_s - typical.nearest->start_s - mean_s)))
            typical.nearest = passage;
    }
    g_array_append_val(set->typical, typical);
}

static RfPassageSet *set_new(const RfLineCrossings *crossings, double divisions, bool is_rise)
{
    RfPassageSet *set = g_new0(RfPassageSet, 1);
    set->passages = rf_line_crossings_passages(crossings, divisions, is_rise);
    set->typical = g_array_new(FALSE, FALSE, sizeof(RfTypicalPassage));
    unsigned courses = rf_line_crossings_courses(crossings), with_any = 0;
    g_autofree unsigned *per_course = g_new0(unsigned, courses + 1);
    for (guint i = 0; i < set->passages->len; i++)
        per_course[g_array_index(set->passages, RfPassage, i).course]++;
    for (unsigned c = 0; c < courses; c++) {
        with_any += per_course[c] > 0;
        for (double sign = -1; per_course[c] > 0 && sign < 2.5; sign++) add_typical(set, c, sign);
    }
    set->per_course = with_any ? (double)set->passages->len / with_any : 1;
    return set;
}

/* ---- all of them ---- */

static void ensure(RfPassageSets *sets, const RfLineCrossings *crossings, double divisions, bool is_rise)
{
    int64_t key = key_of(divisions, is_rise);
    if (!(divisions > grain) || g_hash_table_size(sets->sets) >= MOST_SETS ||
        g_hash_table_contains(sets->sets, &key))
        return;
    g_hash_table_insert(sets->sets, g_memdup2(&key, sizeof key), set_new(crossings, divisions, is_rise));
}

RfPassageSets *rf_passage_sets_new(const RfHandTimings *timings, const RfLineCrossings *crossings)
{
    RfPassageSets *sets = g_new0(RfPassageSets, 1);
    sets->sets = g_hash_table_new_full(g_int64_hash, g_int64_equal, g_free, set_free);
    sets->step_mm = rf_line_crossings_step_mm(crossings);
    for (guint i = 0; i < timings->entries->len; i++) {
        const RfHandEntry *entry = &g_array_index(timings->entries, RfHandEntry, i);
        if (entry->problem) continue;
        double claimed = rf_passage_sets_divisions(sets, entry);
        for (double off = -1; off < 1.5; off++) ensure(sets, crossings, claimed + off, entry->is_rise);
    }
    return sets;
}

void rf_passage_sets_free(RfPassageSets *sets)
{
    if (!sets) return;
    g_hash_table_unref(sets->sets);
    g_free(sets);
}

const RfPassageSet *rf_passage_sets_find(const RfPassageSets *sets, double divisions, bool is_rise)
{
    int64_t key = key_of(divisions, is_rise);
    return divisions > grain ? g_hash_table_lookup(sets->sets, &key) : NULL;
}

double rf_passage_sets_divisions(const RfPassageSets *sets, const RfHandEntry *entry)
{
    double divisions = entry->divisions > 0 ? entry->divisions : entry->distance_mm / sets->step_mm;
    double whole = round(divisions);
    return whole >= 1 && fabs(divisions - whole) < whole_within * whole ? whole : divisions;
}

guint rf_passage_set_from(const RfPassageSet *set, double start_s)
{
    guint low = 0, high = set->passages->len;
    while (low < high) {
        guint middle = low + (high - low) / 2;
        if (g_array_index(set->passages, RfPassage, middle).start_s < start_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}
