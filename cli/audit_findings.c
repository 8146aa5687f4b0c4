#include "cli/audit_findings.h"

#include "physics/agreement.h"

#include <inttypes.h>
#include <math.h>

/* ---- choosing ---- */

typedef struct {
    double weight[RF_FINDINGS]; /* of all explanations of that kind */
    const RfExplanation *best[RF_FINDINGS];
    double total;
} Tally;

static Tally tally_of(const GArray *explanations)
{
    Tally tally = {0};
    for (guint i = 0; i < explanations->len; i++) {
        const RfExplanation *one = &g_array_index(explanations, RfExplanation, i);
        tally.total += one->weight;
        tally.weight[one->finding] += one->weight;
        if (!tally.best[one->finding] || one->weight > tally.best[one->finding]->weight)
            tally.best[one->finding] = one;
    }
    return tally;
}

static RfFinding heaviest(const Tally *tally, RfFinding except)
{
    RfFinding best = RF_FINDING_UNMATCHED;
    for (int kind = 0; kind < RF_FINDINGS; kind++)
        if ((RfFinding)kind != except && tally->weight[kind] > tally->weight[best]) best = (RfFinding)kind;
    return best;
}

/* A passage with the field switched inside agrees in time and start as a sound one would: neither the level nor the rest
 * of this speaks against it. */
static const RfExplanation *choose(const RfHandHabit *habit, const Tally *tally)
{
    RfFinding finding = heaviest(tally, RF_FINDINGS);
    const RfExplanation *sound = tally->best[RF_FINDING_AGREES];
    if (finding == RF_FINDING_SWITCHED_INSIDE || !sound) return tally->best[finding];
    if (rf_audit_match_is_within(habit, sound)) return sound;
    return finding == RF_FINDING_AGREES && rf_audit_match_spreads(habit, sound) > rf_audit_match_level(habit)
               ? tally->best[heaviest(tally, RF_FINDING_AGREES)]
               : tally->best[finding];
}

/* How sure the match is: the share of all explanations that put the entry on the same droplet, or on none. */
static double confidence_of(const GArray *explanations, const RfExplanation *chosen, double total)
{
    double same = 0;
    for (guint i = 0; i < explanations->len; i++) {
        const RfExplanation *one = &g_array_index(explanations, RfExplanation, i);
        if (chosen->passage ? one->passage && one->passage->course == chosen->passage->course : !one->passage)
            same += one->weight;
    }
    return total > 0 ? same / total : 0;
}

/* ---- in words ---- */

static const char *divisions_word(double divisions)
{
    return fabs(divisions - 1) < 1e-9 ? "division" : "divisions";
}

static void append_claim(GString *out, const RfHandHabit *habit, const RfHandEntry *entry,
                         const RfExplanation *own)
{
    if (!own) return;
    double off_s = entry->time_s - own->tracked_s - habit->bias_s.value;
    g_string_append_printf(out,
                           "the label's droplet %u took %.2f s then, %.1f spreads from what is written; ",
                           own->passage->droplet, own->tracked_s, fabs(off_s) / habit->spread_s.value);
}

static void append_finding(GString *out, const RfAuditMatch *match, const RfHandEntry *entry, guint index,
                           const RfExplanation *chosen, const Tally *tally)
{
    const RfHandHabit *habit = rf_audit_match_habit(match);
    double claimed = rf_audit_match_divisions(match, index);
    double off_s = chosen->read_s - chosen->tracked_s;
    unsigned droplet = chosen->passage ? chosen->passage->droplet : 0;
    switch (chosen->finding) {
    case RF_FINDING_AGREES:
        g_string_append_printf(
            out, "droplet %u took %.2f s; the difference of %+.2f s is within this person's timing", droplet,
            chosen->tracked_s, off_s);
        break;
    case RF_FINDING_DISAGREES:
        g_string_append_printf(
            out,
            "droplet %u took %.2f s; the difference of %+.2f s is %.1f spreads from the person's usual "
            "%+.2f s, and no single slip explains it",
            droplet, chosen->tracked_s, off_s, rf_audit_match_spreads(habit, chosen), habit->bias_s.value);
        break;
    case RF_FINDING_OTHER_DROPLET:
        append_claim(out, habit, entry, tally->best[RF_FINDING_DISAGREES]);
        g_string_append_printf(out, "droplet %u, not the label's %u, crossed %.4g %s in %.2f s at that time",
                               droplet, rf_audit_match_owner(match, index), chosen->divisions,
                               divisions_word(chosen->divisions), chosen->tracked_s);
        break;
    case RF_FINDING_LINE_MISCOUNT:
        append_claim(out, habit, entry, tally->best[RF_FINDING_DISAGREES]);
        g_string_append_printf(out, "%.4g %s, not %.4g, took droplet %u %.2f s", chosen->divisions,
                               divisions_word(chosen->divisions), claimed, droplet, chosen->tracked_s);
        break;
    case RF_FINDING_DIGIT_SLIP:
        g_string_append_printf(out, "droplet %u took %.2f s; %.4g s would fit where %s stands", droplet,
                               chosen->tracked_s, chosen->read_s, entry->time_text);
        break;
    case RF_FINDING_SWITCHED_INSIDE:
        g_string_append_printf(
            out,
            "droplet %u did cross %.4g %s in %.2f s, but the field switched at %.2f s, while it was "
            "being timed: no speed follows",
            droplet, chosen->divisions, divisions_word(chosen->divisions), chosen->tracked_s,
            chosen->passage->switch_s);
        break;
    case RF_FINDING_UNMATCHED:
    case RF_FINDINGS:
        g_string_append(out, "no droplet that was followed did this at the noted time");
        break;
    }
}

static void append_noted_start(GString *out, const RfAuditMatch *match, double at_s)
{
    double end_s = rf_audit_match_end_s(match);
    g_string_append_printf(out, "; on the recording's clock that is %.2f s", at_s);
    if (at_s < 0 || at_s > end_s) g_string_append_printf(out, ", outside its 0 to %.2f s", end_s);
}

static char *evidence_of(const RfAuditMatch *match, const RfHandEntry *entry, guint index,
                         const RfExplanation *chosen, const Tally *tally)
{
    const RfHandHabit *habit = rf_audit_match_habit(match);
    GString *out = g_string_new(NULL);
    append_finding(out, match, entry, index, chosen, tally);
    bool has_clock = habit->has_clock && entry->has_start;
    if (chosen->passage && has_clock)
        g_string_append_printf(out, "; frames %" PRId64 " to %" PRId64, chosen->passage->first_frame,
                               chosen->passage->last_frame);
    else if (chosen->passage)
        g_string_append_printf(
            out,
            "; no clock tells which passage: all of the droplet's are taken together, one of them in "
            "frames %" PRId64 " to %" PRId64,
            chosen->passage->first_frame, chosen->passage->last_frame);
    else if (has_clock)
        append_noted_start(out, match, entry->start_s - habit->clock_offset_s.value);
    return g_string_free(out, FALSE);
}

/* ---- rows ---- */

static RfAuditRow unreadable_row(const RfHandEntry *entry)
{
    return (RfAuditRow){
        .entry = entry->entry,
        .label = g_strdup(entry->label),
        .hand_time_s = {entry->time_s, 0},
        .finding = rf_finding_to_string(RF_FINDING_UNMATCHED),
        .evidence = g_strdup_printf("can't be read: %s", entry->problem),
    };
}

RfAuditRow rf_audit_findings_row(const RfAuditMatch *match, const RfHandTimings *timings, guint index,
                                 GArray *explanations)
{
    const RfHandEntry *entry = &g_array_index(timings->entries, RfHandEntry, index);
    if (entry->problem) return unreadable_row(entry);
    const RfHandHabit *habit = rf_audit_match_habit(match);
    rf_audit_match_explain(match, index, explanations);
    Tally tally = tally_of(explanations);
    const RfExplanation *chosen = choose(habit, &tally);
    RfAuditRow row = {
        .entry = entry->entry,
        .label = g_strdup(entry->label),
        .hand_time_s = {entry->time_s, habit->spread_s.value},
        .finding = rf_finding_to_string(chosen->finding),
        .evidence = evidence_of(match, entry, index, chosen, &tally),
        .match_confidence = confidence_of(explanations, chosen, tally.total),
    };
    if (!chosen->passage) return row;
    row.droplet = chosen->passage->droplet;
    row.has_tracked = true;
    row.tracked_time_s = (RfValue){chosen->tracked_s, chosen->u_tracked_s};
    row.difference_s = entry->time_s - chosen->tracked_s;
    row.en_number = rf_agreement_en_number(row.hand_time_s, row.tracked_time_s);
    row.start_s = chosen->passage->start_s;
    return row;
}
