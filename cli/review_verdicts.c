#include "cli/review_verdicts.h"

#include "cli/review.h"
#include "cli/review_place.h"

static void replace_reason(RfDropletRow *row, char *reason)
{
    g_free(row->reason);
    row->reason = reason;
}

static void set_aside(RfDropletRow *row, const RfReviewRow *entry)
{
    row->accepted = false;
    row->is_overruled =
        !row->is_overruled; /* who sets aside what another restored is back at the program's verdict */
    replace_reason(row, g_strdup_printf("set aside by %s: %s%s%s", entry->name, entry->reason,
                                        *row->reason ? "; before: " : "", row->reason));
}

static void restore(RfDropletRow *row, const RfReviewRow *entry)
{
    row->accepted = true;
    row->is_overruled = !row->is_overruled;
    replace_reason(
        row, g_strdup_printf("restored by %s: %s; before: %s", entry->name, entry->reason, row->reason));
}

static bool may_change(const RfDropletRow *row, const RfReviewRow *entry)
{
    return entry->action == RF_REVIEW_SET_ASIDE ? row->accepted : !row->accepted && row->has_charge;
}

/* Why there was nothing to change: the rows are as asked for, or can't be. */
static void settle_unchanged(RfReviewRow *entry, const RfDropletRow *row)
{
    if (entry->action == RF_REVIEW_SET_ASIDE)
        rf_review_settle(
            entry, RF_REVIEW_ALREADY,
            g_strdup_printf("droplet %u was set aside without it: %s", row->droplet, row->reason));
    else if (row->accepted)
        rf_review_settle(entry, RF_REVIEW_ALREADY,
                         g_strdup_printf("droplet %u was accepted without it", row->droplet));
    else
        rf_review_settle(entry, RF_REVIEW_NOT_POSSIBLE,
                         g_strdup_printf("droplet %u has no charge that could be accepted: %s", row->droplet,
                                         row->reason));
}

/* What came of it, with what the program had found where that is overruled. */
static char *say_changed(const RfReviewRow *entry, const char *before, bool is_whole)
{
    return g_strdup_printf("droplet %u was %s%s%s%s", entry->now,
                           entry->action == RF_REVIEW_SET_ASIDE ? "set aside" : "restored",
                           is_whole ? "" : ", those of its spells that could be", *before ? "; before: " : "",
                           before);
}

static void apply(GArray *droplets, RfReviewRow *entry)
{
    const RfDropletRow *unchanged = NULL;
    g_autofree char *before = NULL;
    for (guint i = 0; i < droplets->len; i++) {
        RfDropletRow *row = &g_array_index(droplets, RfDropletRow, i);
        if (row->droplet != entry->now) continue;
        if (!may_change(row, entry)) {
            unchanged = row;
            continue;
        }
        if (!before) before = g_strdup(row->reason);
        if (entry->action == RF_REVIEW_SET_ASIDE)
            set_aside(row, entry);
        else
            restore(row, entry);
    }
    if (before)
        rf_review_settle(entry, RF_REVIEW_HONOURED, say_changed(entry, before, !unchanged));
    else if (unchanged)
        settle_unchanged(entry, unchanged);
    else
        rf_review_settle(entry, RF_REVIEW_NOT_POSSIBLE,
                         g_strdup_printf("droplet %u wasn't measured", entry->now));
}

void rf_review_verdicts_apply(RfResults *results)
{
    for (guint i = 0; i < results->review->len; i++) {
        RfReviewRow *entry = &g_array_index(results->review, RfReviewRow, i);
        if (entry->action != RF_REVIEW_SET_ASIDE && entry->action != RF_REVIEW_RESTORE) continue;
        char *why = NULL;
        entry->now = rf_review_place_find(results->paths, &entry->place, &why);
        if (entry->now == 0)
            rf_review_settle(entry, RF_REVIEW_NOT_FOUND, why);
        else
            apply(results->droplets, entry);
    }
}

void rf_review_verdicts_warn(RfResults *results)
{
    for (guint i = 0; i < results->review->len; i++) {
        const RfReviewRow *entry = &g_array_index(results->review, RfReviewRow, i);
        if (entry->outcome == RF_REVIEW_HONOURED || entry->outcome == RF_REVIEW_ALREADY) continue;
        rf_results_warn(results, "review, line %u: %s droplet %u: not done: %s", entry->line,
                        rf_review_action_to_string(entry->action), entry->place.droplet, entry->detail);
    }
}
