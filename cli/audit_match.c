#include "cli/audit_match.h"

#include "cli/audit_labels.h"
#include "cli/digit_slip.h"
#include "cli/passage_sets.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_math.h>
#include <math.h>
#include <string.h>

enum { ROUNDS = 25, LEARN_FROM = 1500 };

/* How often each comes about, before anything is looked at: a judgement, of one order with published transcription errors
 * (one to a few per cent); a factor of two either way moves findings only where two explain an entry nearly as well. */
static const double prior_agrees = 0.82, prior_disagrees = 0.02, prior_other = 0.02, prior_miscount = 0.03,
                    prior_slip = 0.03, prior_switched = 0.08, prior_unmatched = 0.02;

/* A start at a crossing again, not at the first; a noted voltage that contradicts the field; its sign alone. */
static const double again_share = 0.15, wrong_voltage_share = 0.05, wrong_sign_share = 0.5;

/* Two-sided chance that the verdict level leaves to a sound entry; spreads within which a noted start fits. */
static const double level_chance = 0.005, start_fits = 3.5;

/* A hand that slips now and then: so often, so many times the usual spread. Only where another mistake is at work already; for a
 * sound entry the verdict level decides. */
static const double clumsy_share = 0.03, clumsy_spreads = 3;

/* The label's own droplet in view speaks against a timing of nothing. */
static const double in_view_share = 0.25;

static const double least_spread_s = 0.01, least_clock_spread_s = 0.02;

struct RfAuditMatch {
    const RfHandTimings *timings;
    const RfLineCrossings *crossings;
    RfPassageSets *sets;
    RfAuditLabels *labels;
    RfHandHabit habit;
    bool is_settled; /* the habit is known well enough to say who is within it */
};

const char *rf_finding_to_string(RfFinding finding)
{
    static const char *const names[RF_FINDINGS] = {
        [RF_FINDING_AGREES] = "agrees",
        [RF_FINDING_DISAGREES] = "disagrees",
        [RF_FINDING_OTHER_DROPLET] = "other droplet",
        [RF_FINDING_LINE_MISCOUNT] = "line miscount",
        [RF_FINDING_DIGIT_SLIP] = "digit slip",
        [RF_FINDING_SWITCHED_INSIDE] = "field switched inside",
        [RF_FINDING_UNMATCHED] = "unmatched",
    };
    return names[finding];
}

const RfHandHabit *rf_audit_match_habit(const RfAuditMatch *match)
{
    return &match->habit;
}

static const RfHandEntry *entry_at(const RfAuditMatch *match, guint index)
{
    return &g_array_index(match->timings->entries, RfHandEntry, index);
}

double rf_audit_match_divisions(const RfAuditMatch *match, guint index)
{
    const RfHandEntry *entry = entry_at(match, index);
    return rf_passage_sets_divisions(match->sets, entry);
}

double rf_audit_match_level(const RfHandHabit *habit)
{
    return gsl_cdf_tdist_Qinv(level_chance / 2, fmax(habit->sound - 1, 2));
}

double rf_audit_match_spreads(const RfHandHabit *habit, const RfExplanation *one)
{
    double u_s = sqrt(habit->spread_s.value * habit->spread_s.value + one->u_tracked_s * one->u_tracked_s +
                      habit->bias_s.sigma * habit->bias_s.sigma);
    return fabs(one->read_s - one->tracked_s - habit->bias_s.value) / u_s;
}

bool rf_audit_match_is_within(const RfHandHabit *habit, const RfExplanation *one)
{
    return rf_audit_match_spreads(habit, one) <= rf_audit_match_level(habit) &&
           fabs(one->start_z) <= start_fits;
}

double rf_audit_match_end_s(const RfAuditMatch *match)
{
    return rf_line_crossings_end_s(match->crossings);
}

unsigned rf_audit_match_owner(const RfAuditMatch *match, guint index)
{
    const RfHandEntry *entry = entry_at(match, index);
    double at_s =
        entry->has_start && match->habit.has_clock ? entry->start_s - match->habit.clock_offset_s.value : -1;
    int course = rf_audit_labels_owner(match->labels, index, at_s);
    return course < 0 ? 0 : rf_line_crossings_droplet(match->crossings, (unsigned)course);
}

/* ---- densities ---- */

static double normal(double x, double sigma)
{
    double z = x / sigma;
    return exp(-0.5 * z * z) / (sigma * sqrt(2 * M_PI));
}

/* Plain disagreement: anything goes, near misses before far ones (Cauchy). */
static double broad(double difference_s, double tracked_s, double spread_s)
{
    double width_s = fmax(6 * spread_s, 0.2 * tracked_s), z = difference_s / width_s;
    return 1 / (M_PI * width_s * (1 + z * z));
}

static double voltage_share(const RfHandEntry *entry, const RfPassage *passage)
{
    if (!entry->has_voltage || passage->voltage_sign > 1) return 1;
    double noted = entry->voltage_V > 0 ? 1 : entry->voltage_V < 0 ? -1 : 0;
    if (!(fabs(noted) > 0) != !(fabs(passage->voltage_sign) > 0)) return wrong_voltage_share;
    return noted * passage->voltage_sign < 0 ? wrong_sign_share : 1;
}

/* ---- one entry's explanations ---- */

typedef struct {
    const RfAuditMatch *match;
    const RfHandEntry *entry;
    guint index;
    GArray *slips; /* RfDigitSlip */
    GArray *out;
    double at_s; /* noted start on the recording's clock */
    bool has_at;
    int owner;     /* course; -1: any */
    double rivals; /* droplets that could have been timed at that time */
} Case;

static double time_density(const Case *one, const RfExplanation *seen, double read_s)
{
    const RfHandHabit *habit = &one->match->habit;
    double sigma_s =
        sqrt(habit->spread_s.value * habit->spread_s.value + seen->u_tracked_s * seen->u_tracked_s);
    return normal(read_s - seen->tracked_s - habit->bias_s.value, sigma_s);
}

static double clumsy_density(const Case *one, const RfExplanation *seen)
{
    const RfHandHabit *habit = &one->match->habit;
    double off_s = one->entry->time_s - seen->tracked_s - habit->bias_s.value;
    double wide_s = hypot(clumsy_spreads * habit->spread_s.value, seen->u_tracked_s);
    return (1 - clumsy_share) * time_density(one, seen, one->entry->time_s) +
           clumsy_share * normal(off_s, wide_s);
}

static void add(const Case *one, const RfExplanation *seen, RfFinding finding, double read_s, double weight)
{
    if (!(weight > 0)) return;
    RfExplanation explanation = *seen;
    explanation.finding = finding;
    explanation.read_s = read_s;
    explanation.weight *= weight;
    g_array_append_val(one->out, explanation);
}

static void add_slips(const Case *one, const RfExplanation *seen, double share)
{
    for (guint i = 0; i < one->slips->len; i++) {
        const RfDigitSlip *slip = &g_array_index(one->slips, RfDigitSlip, i);
        add(one, seen, RF_FINDING_DIGIT_SLIP, slip->time_s,
            share * prior_slip * slip->weight / 2 * time_density(one, seen, slip->time_s));
    }
}

/* What a passage over the claimed number of divisions can explain. `seen->weight` carries the start's density. */
static void explain_claimed(const Case *one, const RfExplanation *seen)
{
    bool is_own = one->owner < 0 || (unsigned)one->owner == seen->passage->course;
    double share = one->owner < 0 ? 1 / one->rivals : 1;
    double written_s = one->entry->time_s, density = time_density(one, seen, written_s);
    if (!is_own) {
        if (seen->passage->switches == 0)
            add(one, seen, RF_FINDING_OTHER_DROPLET, written_s,
                prior_other / one->rivals * clumsy_density(one, seen));
        return;
    }
    if (seen->passage->switches > 0) {
        add(one, seen, RF_FINDING_SWITCHED_INSIDE, written_s, share * prior_switched * density);
        return;
    }
    add(one, seen, RF_FINDING_AGREES, written_s, share * prior_agrees * density);
    add(one, seen, RF_FINDING_DISAGREES, written_s,
        share * prior_disagrees *
            broad(written_s - seen->tracked_s, seen->tracked_s, one->match->habit.spread_s.value));
    add_slips(one, seen, share);
}

static void explain_miscount(const Case *one, const RfExplanation *seen)
{
    bool is_own = one->owner < 0 || (unsigned)one->owner == seen->passage->course;
    double share = one->owner < 0 ? 1 / one->rivals : 1;
    if (is_own && seen->passage->switches == 0)
        add(one, seen, RF_FINDING_LINE_MISCOUNT, one->entry->time_s,
            share * prior_miscount / 2 * clumsy_density(one, seen));
}

static void explain_passage(const Case *one, const RfPassage *passage, double divisions, double off,
                            double per_course)
{
    double clock_spread_s = one->match->habit.clock_spread_s;
    RfExplanation seen = {
        .passage = passage,
        .tracked_s = passage->end_s - passage->start_s,
        .u_tracked_s = passage->sigma_s,
        .divisions = divisions,
        .start_z = (one->at_s - passage->start_s) / clock_spread_s,
        .weight = normal(one->at_s - passage->start_s, clock_spread_s) / per_course *
                  (passage->is_first ? 1 : again_share) * voltage_share(one->entry, passage),
    };
    if (fabs(off) > 0)
        explain_miscount(one, &seen);
    else
        explain_claimed(one, &seen);
}

/* Without a clock: a droplet's passages of that kind taken together, their own spread included. */
static void explain_typical(const Case *one, const RfTypicalPassage *typical, double divisions, double off)
{
    RfExplanation seen = {
        .passage = typical->nearest,
        .tracked_s = typical->time_s.value,
        .u_tracked_s = typical->time_s.sigma,
        .divisions = divisions,
        .weight =
            voltage_share(one->entry, typical->nearest) / rf_line_crossings_end_s(one->match->crossings),
    };
    if (fabs(off) > 0)
        explain_miscount(one, &seen);
    else
        explain_claimed(one, &seen);
}

static void explain_divisions(const Case *one, double off)
{
    double divisions = rf_audit_match_divisions(one->match, one->index) + off;
    const RfPassageSet *set = rf_passage_sets_find(one->match->sets, divisions, one->entry->is_rise);
    if (!set) return;
    if (one->has_at) {
        double reach_s = 6 * one->match->habit.clock_spread_s;
        for (guint i = rf_passage_set_from(set, one->at_s - reach_s); i < set->passages->len; i++) {
            const RfPassage *passage = &g_array_index(set->passages, RfPassage, i);
            if (passage->start_s > one->at_s + reach_s) break;
            explain_passage(one, passage, divisions, off, set->per_course);
        }
        return;
    }
    for (guint i = 0; i < set->typical->len; i++)
        explain_typical(one, &g_array_index(set->typical, RfTypicalPassage, i), divisions, off);
}

static double rivals_at(const RfAuditMatch *match, double at_s, bool has_at)
{
    unsigned n = 0;
    for (unsigned i = 0; i < rf_line_crossings_courses(match->crossings); i++) {
        double first_s, last_s;
        rf_line_crossings_span(match->crossings, i, &first_s, &last_s);
        n += !has_at || (first_s <= at_s && at_s <= last_s);
    }
    return MAX(n, 2) - 1;
}

static void add_unmatched(const Case *one)
{
    const double usual_s = 10; /* the time by hand may be anything of that order */
    RfExplanation nothing = {
        .finding = RF_FINDING_UNMATCHED,
        .read_s = one->entry->time_s,
        .divisions = rf_audit_match_divisions(one->match, one->index),
        .weight = prior_unmatched * (one->owner < 0 ? 1 : in_view_share) /
                  (2 * rf_line_crossings_end_s(one->match->crossings) + 1) / usual_s,
    };
    g_array_append_val(one->out, nothing);
}

void rf_audit_match_explain(const RfAuditMatch *match, guint index, GArray *out)
{
    const RfHandEntry *entry = entry_at(match, index);
    g_autoptr(GArray) slips = g_array_new(FALSE, FALSE, sizeof(RfDigitSlip));
    rf_digit_slip_find(entry->time_text, entry->time_scale, 2 * match->habit.spread_s.value, slips);
    Case one = {.match = match, .entry = entry, .index = index, .slips = slips, .out = out};
    g_array_set_size(out, 0);
    one.has_at = entry->has_start && match->habit.has_clock;
    one.at_s = one.has_at ? entry->start_s - match->habit.clock_offset_s.value : -1;
    one.owner = rf_audit_labels_owner(match->labels, index, one.at_s);
    one.rivals = rivals_at(match, one.at_s, one.has_at);
    explain_divisions(&one, 0);
    explain_divisions(&one, 1);
    explain_divisions(&one, -1);
    add_unmatched(&one);
}

/* ---- the person's habit ---- */

typedef struct {
    double weight;         /* entries that tell */
    double precision, sum; /* of the mean: each weighs as its variance asks */
    double squares;        /* expected squares of the person's own part */
    double shared;         /* variance of acts that several entries have in common: those without a clock */
    GHashTable *acts;      /* which those are; NULL: not kept */
    double share;          /* how much of the scatter is the person's: what the spread is known from */
} Moments;

/* One round of expectation for a scatter of the person's own on top of each value's known variance (A. P. Dempster, N. M. Laird
 * and D. B. Rubin, J. R. Stat. Soc. B 39 (1977) 1): never negative, whatever the known variances. */
static void gather(Moments *moments, double weight, double value, double variance, double mean, double spread)
{
    double own = spread * spread, all = own + variance, expected = (value - mean) * own / all;
    moments->weight += weight;
    moments->precision += weight / all;
    moments->sum += weight * value / all;
    moments->squares += weight * (expected * expected + variance * own / all);
    moments->share += weight * (own / all) * (own / all);
}

/* Without a clock all timings of one droplet are held against the same mean: what that is off by doesn't average out. */
static void gather_shared(Moments *moments, double weight, const RfExplanation *one)
{
    moments->shared += weight * one->u_tracked_s * one->u_tracked_s;
    g_hash_table_add(moments->acts, (void *)(uintptr_t)one->passage);
}

static double shared_variance(const Moments *moments)
{
    guint acts = g_hash_table_size(moments->acts);
    return acts > 0 ? moments->shared / moments->weight / acts : 0;
}

static double mean_of(const Moments *moments)
{
    return moments->sum / moments->precision;
}

/* n - 1 for the mean that was fitted. */
static double spread_of(const Moments *moments, double least)
{
    return fmax(least, sqrt(moments->squares / fmax(moments->weight - 1, 1)));
}

/* What an entry's explanations weigh together. Once the habit is settled, an entry that is within it is sound and nothing else:
 * shares lost to chance explanations of sound entries would make the spread come out too small. */
static double total_weight(const RfAuditMatch *match, const GArray *explanations, bool *is_sound)
{
    double total = 0, sound = 0;
    *is_sound = false;
    for (guint i = 0; i < explanations->len; i++) {
        const RfExplanation *one = &g_array_index(explanations, RfExplanation, i);
        total += one->weight;
        if (one->finding != RF_FINDING_AGREES) continue;
        sound += one->weight;
        *is_sound |= match->is_settled && rf_audit_match_is_within(&match->habit, one);
    }
    return *is_sound ? sound : total;
}

static void gather_entry(const RfAuditMatch *match, guint index, GArray *explanations, Moments *interval,
                         Moments *start)
{
    const RfHandEntry *entry = entry_at(match, index);
    bool has_clock = entry->has_start && match->habit.has_clock, is_sound;
    rf_audit_match_explain(match, index, explanations);
    double total = total_weight(match, explanations, &is_sound);
    for (guint i = 0; i < explanations->len; i++) {
        const RfExplanation *one = &g_array_index(explanations, RfExplanation, i);
        double share = one->weight / total;
        bool is_agreement = one->finding == RF_FINDING_AGREES;
        if (!(share > 1e-6) || !one->passage || one->finding == RF_FINDING_DISAGREES ||
            (is_sound && !is_agreement))
            continue;
        if (is_agreement && !has_clock) gather_shared(interval, share, one);
        if (is_agreement)
            gather(interval, share, one->read_s - one->tracked_s, one->u_tracked_s * one->u_tracked_s,
                   match->habit.bias_s.value, match->habit.spread_s.value);
        if (has_clock)
            gather(start, share, entry->start_s - one->passage->start_s, 0, match->habit.clock_offset_s.value,
                   match->habit.clock_spread_s);
    }
}

/* One round of expectation and maximisation; at most LEARN_FROM entries, evenly chosen. */
static void learn(RfAuditMatch *match)
{
    g_autoptr(GHashTable) acts = g_hash_table_new(NULL, NULL);
    Moments interval = {.acts = acts}, start = {0};
    g_autoptr(GArray) explanations = g_array_new(FALSE, FALSE, sizeof(RfExplanation));
    guint n = match->timings->entries->len, stride = (n + LEARN_FROM - 1) / LEARN_FROM;
    for (guint i = 0; i < n; i += MAX(stride, 1))
        if (!entry_at(match, i)->problem) gather_entry(match, i, explanations, &interval, &start);
    RfHandHabit *habit = &match->habit;
    habit->sound = interval.weight;
    if (interval.weight > 2.5) {
        habit->bias_s.value = mean_of(&interval);
        habit->spread_s.value = spread_of(&interval, least_spread_s);
        habit->bias_s.sigma = sqrt(1 / interval.precision + shared_variance(&interval));
        habit->spread_s.sigma = habit->spread_s.value / sqrt(2 * fmax(interval.share - 1, 0.5));
    }
    if (start.weight > 2.5) {
        habit->clock_offset_s.value = mean_of(&start);
        habit->clock_spread_s = spread_of(&start, least_clock_spread_s);
        habit->clock_offset_s.sigma = habit->clock_spread_s / sqrt(start.weight);
    }
}

static bool any_has_start(const RfHandTimings *timings)
{
    for (guint i = 0; i < timings->entries->len; i++) {
        const RfHandEntry *entry = &g_array_index(timings->entries, RfHandEntry, i);
        if (entry->has_start && !entry->problem) return true;
    }
    return false;
}

RfAuditMatch *rf_audit_match_new(const RfHandTimings *timings, const RfLineCrossings *crossings)
{
    RfAuditMatch *match = g_new0(RfAuditMatch, 1);
    match->timings = timings;
    match->crossings = crossings;
    match->sets = rf_passage_sets_new(timings, crossings);
    match->labels = rf_audit_labels_new(timings, crossings, match->sets);
    RfHandHabit *habit = &match->habit;
    /* before anything is known: a few tenths, as for anyone with a stopwatch */
    habit->spread_s = (RfValue){0.2, 0.1};
    habit->bias_s = (RfValue){0, 0.2};
    habit->clock_spread_s = 0.4;
    habit->has_clock =
        any_has_start(timings) && rf_audit_labels_find_clock(match->labels, &habit->clock_offset_s.value);
    for (int pass = 0; pass < 2; pass++) {
        const RfLabelHabit known = {habit->has_clock, habit->clock_offset_s.value, habit->clock_spread_s,
                                    habit->bias_s.value, habit->spread_s.value};
        rf_audit_labels_assign(match->labels, &known);
        for (int round = 0; round < ROUNDS; round++) learn(match);
        match->is_settled = true;
    }
    return match;
}

void rf_audit_match_free(RfAuditMatch *match)
{
    if (!match) return;
    rf_audit_labels_free(match->labels);
    rf_passage_sets_free(match->sets);
    g_free(match);
}
