#include "cli/review_paths.h"

#include <math.h>
#include <string.h>

#include "cli/review.h"
#include "cli/review_place.h"
#include "cli/text_number.h"
#include "cli/trails.h"

enum { NOBODY = 0 }; /* rows to be left out */

static RfPathRow *row_at(GArray *rows, guint i)
{
    return &g_array_index(rows, RfPathRow, i);
}

typedef struct { /* where a droplet was first and last measured; n 0: nowhere */
    unsigned n;
    RfPathRow first, last;
} Span;

static Span span_of(GArray *rows, unsigned droplet)
{
    Span span = {0};
    for (guint i = 0; i < rows->len; i++) {
        const RfPathRow *row = row_at(rows, i);
        if (row->droplet != droplet || !row->seen) continue;
        if (span.n == 0 || row->time_s < span.first.time_s) span.first = *row;
        if (span.n == 0 || row->time_s >= span.last.time_s) span.last = *row;
        span.n++;
    }
    return span;
}

static unsigned next_free(GArray *rows)
{
    unsigned most = 0;
    for (guint i = 0; i < rows->len; i++) most = MAX(most, row_at(rows, i)->droplet);
    return most + 1;
}

static char *seconds(double time_s)
{
    GString *text = g_string_new(NULL);
    rf_text_number_append_fixed(text, time_s, 2);
    return g_string_free(text, FALSE);
}

static int by_droplet_then_time(const void *left, const void *right)
{
    const RfPathRow *a = left, *b = right;
    if (a->droplet != b->droplet) return a->droplet < b->droplet ? -1 : 1;
    if (a->time_s < b->time_s || a->time_s > b->time_s) return a->time_s < b->time_s ? -1 : 1;
    return (a->frame > b->frame) - (a->frame < b->frame);
}

static void put_in_order(GArray *rows)
{
    guint kept = 0;
    for (guint i = 0; i < rows->len; i++)
        if (row_at(rows, i)->droplet != NOBODY) *row_at(rows, kept++) = *row_at(rows, i);
    g_array_set_size(rows, kept);
    g_array_sort(rows, by_droplet_then_time);
}

/* What was bridged up to the cut, or from it on, is the path of neither part. */
static void trim(GArray *rows, unsigned droplet)
{
    const Span span = span_of(rows, droplet);
    for (guint i = 0; i < rows->len; i++) {
        RfPathRow *row = row_at(rows, i);
        if (row->droplet == droplet && (row->time_s < span.first.time_s || row->time_s > span.last.time_s))
            row->droplet = NOBODY;
    }
}

static void cut(GArray *rows, RfReviewRow *entry, unsigned droplet)
{
    const Span span = span_of(rows, droplet);
    g_autofree char *at = seconds(entry->cut_s), *start = seconds(span.first.time_s),
                    *end = seconds(span.last.time_s);
    if (span.n == 0 || entry->cut_s <= span.first.time_s || entry->cut_s > span.last.time_s) {
        rf_review_settle(
            entry, RF_REVIEW_NOT_POSSIBLE,
            g_strdup_printf("droplet %u is seen from %s to %s s: there is nothing to cut at %s s", droplet,
                            start, end, at));
        return;
    }
    const unsigned later = next_free(rows);
    rf_trails_cut(rows, droplet, entry->cut_s, later);
    trim(rows, droplet);
    trim(rows, later);
    put_in_order(rows);
    entry->now = droplet;
    entry->other_now = later;
    rf_review_settle(
        entry, RF_REVIEW_HONOURED,
        g_strdup_printf("droplet %u was cut at %s s; from then on it is droplet %u", droplet, at, later));
}

static void join(GArray *rows, RfReviewRow *entry, unsigned one, unsigned another)
{
    const Span a = span_of(rows, one), b = span_of(rows, another);
    const bool is_one_first = a.first.time_s <= b.first.time_s;
    const Span *before = is_one_first ? &a : &b, *after = is_one_first ? &b : &a;
    const unsigned keeps = is_one_first ? one : another, loses = is_one_first ? another : one;
    if (a.n == 0 || b.n == 0 || after->first.time_s <= before->last.time_s) {
        rf_review_settle(entry, RF_REVIEW_NOT_POSSIBLE,
                         g_strdup_printf("droplets %u and %u are in view at the same time: they aren't one",
                                         keeps, loses));
        return;
    }
    for (guint i = 0; i < rows->len; i++)
        if (row_at(rows, i)->droplet == loses) row_at(rows, i)->droplet = keeps;
    put_in_order(rows);
    g_autofree char *gap = seconds(after->first.time_s - before->last.time_s);
    GString *detail = g_string_new(NULL);
    g_string_append_printf(detail, "droplets %u and %u were joined to droplet %u across %s s and ", keeps,
                           loses, keeps, gap);
    rf_text_number_append_fixed(
        detail, hypot(after->first.x_px - before->last.x_px, after->first.y_px - before->last.y_px), 1);
    g_string_append(detail, " px");
    entry->now = keeps;
    rf_review_settle(entry, RF_REVIEW_HONOURED, g_string_free(detail, FALSE));
}

static void apply(GArray *rows, RfReviewRow *entry)
{
    g_autofree char *why = NULL, *other_why = NULL;
    const unsigned droplet = rf_review_place_find(rows, &entry->place, &why);
    const unsigned other =
        entry->action == RF_REVIEW_JOIN ? rf_review_place_find(rows, &entry->other, &other_why) : droplet;
    if (droplet == 0 || other == 0)
        rf_review_settle(entry, RF_REVIEW_NOT_FOUND, g_strdup(why ? why : other_why));
    else if (entry->action == RF_REVIEW_CUT)
        cut(rows, entry, droplet);
    else if (droplet == other) {
        entry->now = droplet;
        rf_review_settle(entry, RF_REVIEW_ALREADY,
                         g_strdup_printf("it is one path already, droplet %u", droplet));
    } else
        join(rows, entry, droplet, other);
}

static bool moves_paths(const RfReviewRow *entry)
{
    return entry->action == RF_REVIEW_CUT || entry->action == RF_REVIEW_JOIN;
}

static void find_as_followed(const GArray *paths, RfReviewRow *entry)
{
    g_autofree char *why = NULL, *other_why = NULL;
    entry->found = rf_review_place_find(paths, &entry->place, &why);
    if (entry->action == RF_REVIEW_JOIN)
        entry->other_found = rf_review_place_find(paths, &entry->other, &other_why);
}

GArray *rf_review_paths_apply(GArray *paths, GArray *review)
{
    g_autoptr(GArray) rows = NULL;
    for (guint i = 0; i < review->len; i++) find_as_followed(paths, &g_array_index(review, RfReviewRow, i));
    for (guint i = 0; i < review->len; i++) {
        RfReviewRow *entry = &g_array_index(review, RfReviewRow, i);
        if (!moves_paths(entry)) continue;
        if (!rows) {
            rows = g_array_sized_new(FALSE, FALSE, sizeof(RfPathRow), paths->len);
            g_array_append_vals(rows, paths->data, paths->len);
        }
        apply(rows, entry);
    }
    if (!rows) return g_array_ref(paths);
    return g_steal_pointer(&rows);
}
