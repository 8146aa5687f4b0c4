#include "cli/audit_labels.h"

#include <math.h>

enum { CLOCK_ENTRIES = 80, CLOCK_TRIES = 60, LABEL_ENTRIES = 400, LEAST_NOTED = 4, CROWD = 4 };

/* A match this poor says nothing; so much must all entries of a label say together; a match this good counts as one; and a
 * label follows a droplet if at least this share of what it could match belongs there. */
static const double nothing = 0.02, least_evidence = 2.5, good_match = 0.1, least_share = 0.4;
/* A droplet that has a label already is less likely to have another. */
static const double taken_already = 1.6;
static const double window_s = 0.4, near_time_s = 0.6, clock_spread_s = 0.3, time_spread_s = 0.25,
                    unmoved_bonus = 3, least_clock_evidence = 1.2, span_margin_s = 0.5, most_overlap_s = 1;

struct RfAuditLabels {
    const RfHandTimings *timings;
    const RfLineCrossings *crossings;
    const RfPassageSets *sets;
    unsigned n;         /* labels */
    unsigned *label;    /* of each entry */
    GPtrArray *entries; /* GArray of guint per label: its entries */
    GPtrArray *owners;  /* GArray of unsigned per label: courses; empty: follows none */
};

static const RfHandEntry *entry_at(const RfAuditLabels *labels, guint index)
{
    return &g_array_index(labels->timings->entries, RfHandEntry, index);
}

static void array_unref(void *array)
{
    g_array_unref(array);
}

static unsigned label_number(RfAuditLabels *labels, GHashTable *numbers, const char *text)
{
    void *found = g_hash_table_lookup(numbers, text);
    if (found) return GPOINTER_TO_UINT(found) - 1;
    g_hash_table_insert(numbers, (char *)(uintptr_t)text, GUINT_TO_POINTER(++labels->n));
    g_ptr_array_add(labels->entries, g_array_new(FALSE, FALSE, sizeof(guint)));
    g_ptr_array_add(labels->owners, g_array_new(FALSE, FALSE, sizeof(unsigned)));
    return labels->n - 1;
}

RfAuditLabels *rf_audit_labels_new(const RfHandTimings *timings, const RfLineCrossings *crossings,
                                   const RfPassageSets *sets)
{
    RfAuditLabels *labels = g_new0(RfAuditLabels, 1);
    labels->timings = timings;
    labels->crossings = crossings;
    labels->sets = sets;
    labels->label = g_new0(unsigned, timings->entries->len + 1);
    labels->entries = g_ptr_array_new_with_free_func(array_unref);
    labels->owners = g_ptr_array_new_with_free_func(array_unref);
    g_autoptr(GHashTable) numbers = g_hash_table_new(g_str_hash, g_str_equal);
    for (guint i = 0; i < timings->entries->len; i++) {
        labels->label[i] = label_number(labels, numbers, entry_at(labels, i)->label);
        if (!entry_at(labels, i)->problem)
            g_array_append_val(g_ptr_array_index(labels->entries, labels->label[i]), i);
    }
    return labels;
}

void rf_audit_labels_free(RfAuditLabels *labels)
{
    if (!labels) return;
    g_ptr_array_unref(labels->entries);
    g_ptr_array_unref(labels->owners);
    g_free(labels->label);
    g_free(labels);
}

/* ---- how well an entry fits each droplet ---- */

static double bell(double z)
{
    return exp(-0.5 * z * z);
}

/* match[course]: 0..1, the best passage's. */
static void match_courses(const RfAuditLabels *labels, const RfHandEntry *entry, const RfLabelHabit *habit,
                          double *match)
{
    for (unsigned c = 0; c < rf_line_crossings_courses(labels->crossings); c++) match[c] = 0;
    const RfPassageSet *set =
        rf_passage_sets_find(labels->sets, rf_passage_sets_divisions(labels->sets, entry), entry->is_rise);
    if (!set) return;
    if (!habit->has_clock || !entry->has_start) {
        for (guint i = 0; i < set->typical->len; i++) {
            const RfTypicalPassage *typical = &g_array_index(set->typical, RfTypicalPassage, i);
            double sigma_s = hypot(typical->time_s.sigma, habit->spread_s);
            double fit = bell((entry->time_s - typical->time_s.value - habit->bias_s) / sigma_s);
            match[typical->course] = fmax(match[typical->course], fit);
        }
        return;
    }
    double at_s = entry->start_s - habit->clock_offset_s, reach_s = 4 * habit->clock_spread_s;
    for (guint i = rf_passage_set_from(set, at_s - reach_s); i < set->passages->len; i++) {
        const RfPassage *passage = &g_array_index(set->passages, RfPassage, i);
        if (passage->start_s > at_s + reach_s) return;
        double late = (at_s - passage->start_s) / habit->clock_spread_s;
        double longer = (entry->time_s - passage->end_s + passage->start_s - habit->bias_s) /
                        hypot(habit->spread_s, passage->sigma_s);
        match[passage->course] = fmax(match[passage->course], bell(late) * bell(longer));
    }
}

static double evidence(double match)
{
    return log1p(match / nothing);
}

static unsigned best_of(const double *values, unsigned n)
{
    unsigned best = 0;
    for (unsigned i = 1; i < n; i++)
        if (values[i] > values[best]) best = i;
    return best;
}

/* ---- the clock ---- */

static int compare_doubles(const void *left, const void *right)
{
    double a = *(const double *)left, b = *(const double *)right;
    return (a > b) - (a < b);
}

/* Every offset that would put one entry on one passage of about its length. */
static GArray *possible_offsets(const RfAuditLabels *labels, guint stride)
{
    GArray *offsets = g_array_new(FALSE, FALSE, sizeof(double));
    for (guint i = 0; i < labels->timings->entries->len; i += stride) {
        const RfHandEntry *entry = entry_at(labels, i);
        const RfPassageSet *set =
            entry->problem || !entry->has_start
                ? NULL
                : rf_passage_sets_find(labels->sets, rf_passage_sets_divisions(labels->sets, entry),
                                       entry->is_rise);
        for (guint k = 0; set && k < set->passages->len; k++) {
            const RfPassage *passage = &g_array_index(set->passages, RfPassage, k);
            double offset_s = entry->start_s - passage->start_s;
            if (fabs(entry->time_s - passage->end_s + passage->start_s) < near_time_s)
                g_array_append_val(offsets, offset_s);
        }
    }
    g_array_sort(offsets, compare_doubles);
    return offsets;
}

typedef struct {
    double offset_s;
    guint count;
} Crowd;

static int fullest_first(const void *left, const void *right)
{
    const Crowd *a = left, *b = right;
    if (a->count != b->count) return a->count > b->count ? -1 : 1;
    return (a->offset_s > b->offset_s) - (a->offset_s < b->offset_s);
}

/* Where offsets crowd: middles of windows, the fullest first, none twice. */
static GArray *crowded_offsets(const GArray *offsets)
{
    GArray *crowds = g_array_new(FALSE, FALSE, sizeof(Crowd));
    double sum = 0;
    for (guint first = 0, i = 0; i < offsets->len; i++) {
        sum += g_array_index(offsets, double, i);
        while (g_array_index(offsets, double, i) - g_array_index(offsets, double, first) > window_s)
            sum -= g_array_index(offsets, double, first++);
        Crowd crowd = {sum / (i - first + 1), i - first + 1};
        g_array_append_val(crowds, crowd);
    }
    g_array_sort(crowds, fullest_first);
    GArray *chosen = g_array_new(FALSE, FALSE, sizeof(double));
    for (guint i = 0; i < crowds->len && chosen->len < CLOCK_TRIES; i++) {
        double offset_s = g_array_index(crowds, Crowd, i).offset_s;
        bool is_near = false;
        for (guint k = 0; k < chosen->len && !is_near; k++)
            is_near = fabs(g_array_index(chosen, double, k) - offset_s) < window_s / 4;
        if (!is_near) g_array_append_val(chosen, offset_s);
    }
    g_array_unref(crowds);
    return chosen;
}

/* Sum over labels of what their best droplet has to say for the offset; *used: entries. */
static double evidence_for(const RfAuditLabels *labels, double offset_s, guint stride, unsigned *used)
{
    const RfLabelHabit habit = {true, offset_s, clock_spread_s, 0, time_spread_s};
    unsigned courses = rf_line_crossings_courses(labels->crossings);
    g_autofree double *match = g_new(double, courses), *sum = g_new(double, courses);
    double total = 0;
    *used = 0;
    for (unsigned l = 0; l < labels->n; l++) {
        const GArray *entries = g_ptr_array_index(labels->entries, l);
        for (unsigned c = 0; c < courses; c++) sum[c] = 0;
        for (guint i = 0; i < entries->len; i++) {
            guint index = g_array_index(entries, guint, i);
            if (index % stride || !entry_at(labels, index)->has_start) continue;
            ++*used;
            match_courses(labels, entry_at(labels, index), &habit, match);
            for (unsigned c = 0; c < courses; c++) sum[c] += evidence(match[c]);
        }
        total += sum[best_of(sum, courses)];
    }
    return total;
}

bool rf_audit_labels_find_clock(const RfAuditLabels *labels, double *offset_s)
{
    if (rf_line_crossings_courses(labels->crossings) == 0) return false;
    guint stride = MAX(1, labels->timings->entries->len / CLOCK_ENTRIES);
    g_autoptr(GArray) offsets = possible_offsets(labels, stride);
    g_autoptr(GArray) tries = crowded_offsets(offsets);
    unsigned used;
    double best = evidence_for(labels, 0, stride, &used) + unmoved_bonus;
    *offset_s = 0;
    /* so few starts fit somewhere by chance */
    guint n_tries = used < LEAST_NOTED ? 0 : tries->len;
    for (guint i = 0; i < n_tries; i++) {
        double here = evidence_for(labels, g_array_index(tries, double, i), stride, &used);
        if (here > best) {
            best = here;
            *offset_s = g_array_index(tries, double, i);
        }
    }
    return used > 0 && best > least_clock_evidence * used;
}

/* ---- who follows whom ---- */

static bool is_in_span(const RfAuditLabels *labels, unsigned course, double at_s)
{
    double first_s, last_s;
    rf_line_crossings_span(labels->crossings, course, &first_s, &last_s);
    return first_s - span_margin_s <= at_s && at_s <= last_s + span_margin_s;
}

static bool overlaps_owner(const RfAuditLabels *labels, const GArray *owners, unsigned course)
{
    double first_s, last_s;
    rf_line_crossings_span(labels->crossings, course, &first_s, &last_s);
    for (guint i = 0; i < owners->len; i++) {
        double from_s, to_s;
        rf_line_crossings_span(labels->crossings, g_array_index(owners, unsigned, i), &from_s, &to_s);
        if (fmin(last_s, to_s) - fmax(first_s, from_s) > most_overlap_s) return true;
    }
    return false;
}

typedef struct {
    RfAuditLabels *labels;
    const RfLabelHabit *habit;
    unsigned courses;
    bool *is_taken;
    double *match; /* entries x courses, of one label */
    double *sum;
} Assignment;

static guint stride_of(const GArray *entries)
{
    return 1 + entries->len / LABEL_ENTRIES;
}

static double at_of(const Assignment *work, guint index)
{
    const RfHandEntry *entry = entry_at(work->labels, index);
    return work->habit->has_clock && entry->has_start ? entry->start_s - work->habit->clock_offset_s : -1;
}

/* The droplet that those entries say most for which no owner so far could have been; -1: none says enough. */
static int next_owner(const Assignment *work, const GArray *entries, const GArray *owners)
{
    for (unsigned c = 0; c < work->courses; c++) work->sum[c] = 0;
    guint stride = stride_of(entries);
    for (guint i = 0, row = 0; i < entries->len; i += stride, row++) {
        double at_s = at_of(work, g_array_index(entries, guint, i));
        bool is_spoken_for = owners->len > 0 && at_s < 0;
        for (guint k = 0; k < owners->len && !is_spoken_for; k++)
            is_spoken_for = is_in_span(work->labels, g_array_index(owners, unsigned, k), at_s);
        for (unsigned c = 0; c < work->courses && !is_spoken_for; c++)
            work->sum[c] += evidence(work->match[row * work->courses + c]);
    }
    for (unsigned c = 0; c < work->courses; c++) {
        work->sum[c] -= work->is_taken[c] ? taken_already : 0;
        if (overlaps_owner(work->labels, owners, c)) work->sum[c] = 0;
    }
    unsigned best = best_of(work->sum, work->courses);
    return work->sum[best] > least_evidence ? (int)best : -1;
}

/* Of the entries that match any droplet well, how many match the label's own? */
static double own_share(const Assignment *work, const GArray *entries, const GArray *owners)
{
    double own = 0, any = 0;
    guint stride = stride_of(entries);
    for (guint i = 0, row = 0; i < entries->len; i += stride, row++) {
        const double *match = &work->match[row * work->courses];
        any += match[best_of(match, work->courses)] > good_match;
        for (guint k = 0; k < owners->len; k++)
            if (match[g_array_index(owners, unsigned, k)] > good_match) {
                own++;
                break;
            }
    }
    return any > 0 ? own / any : 1;
}

static void assign_label(Assignment *work, unsigned label)
{
    const GArray *entries = g_ptr_array_index(work->labels->entries, label);
    GArray *owners = g_ptr_array_index(work->labels->owners, label);
    g_array_set_size(owners, 0);
    if (entries->len == 0 || *entry_at(work->labels, g_array_index(entries, guint, 0))->label == '\0') return;
    guint stride = stride_of(entries);
    for (guint i = 0, row = 0; i < entries->len; i += stride, row++)
        match_courses(work->labels, entry_at(work->labels, g_array_index(entries, guint, i)), work->habit,
                      &work->match[row * work->courses]);
    for (int owner = next_owner(work, entries, owners); owner >= 0;
         owner = next_owner(work, entries, owners)) {
        unsigned course = (unsigned)owner;
        g_array_append_val(owners, course);
    }
    if (entries->len >= CROWD && own_share(work, entries, owners) < least_share) g_array_set_size(owners, 0);
    for (guint i = 0; i < owners->len; i++) work->is_taken[g_array_index(owners, unsigned, i)] = true;
}

static int most_entries_first(const void *left, const void *right, void *user)
{
    const RfAuditLabels *labels = user;
    unsigned a = *(const unsigned *)left, b = *(const unsigned *)right;
    guint n_a = ((const GArray *)g_ptr_array_index(labels->entries, a))->len;
    guint n_b = ((const GArray *)g_ptr_array_index(labels->entries, b))->len;
    if (n_a != n_b) return n_a > n_b ? -1 : 1;
    return a < b ? -1 : a > b;
}

void rf_audit_labels_assign(RfAuditLabels *labels, const RfLabelHabit *habit)
{
    unsigned courses = rf_line_crossings_courses(labels->crossings);
    if (courses == 0) return;
    g_autofree bool *is_taken = g_new0(bool, courses);
    g_autofree double *match = g_new(double, (gsize)(LABEL_ENTRIES + 2) * courses),
                      *sum = g_new(double, courses);
    g_autofree unsigned *order = g_new(unsigned, labels->n);
    for (unsigned l = 0; l < labels->n; l++) order[l] = l;
    g_qsort_with_data(order, (gint)labels->n, sizeof *order, most_entries_first, labels);
    Assignment work = {labels, habit, courses, is_taken, match, sum};
    for (unsigned l = 0; l < labels->n; l++) assign_label(&work, order[l]);
}

int rf_audit_labels_owner(const RfAuditLabels *labels, guint index, double at_s)
{
    const GArray *owners = g_ptr_array_index(labels->owners, labels->label[index]);
    for (guint i = 0; i < owners->len; i++) {
        unsigned course = g_array_index(owners, unsigned, i);
        if (at_s < 0 || is_in_span(labels, course, at_s)) return (int)course;
    }
    return -1;
}
