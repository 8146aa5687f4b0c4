#include "physics/field_log.h"

#include <math.h>
#include <stdlib.h>

#include "physics/physics_error.h"

static const RfLogSpan *span_at(const GArray *spans, unsigned k)
{
    return &g_array_index(spans, RfLogSpan, k);
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Voltages whose difference the motion need not tell: the log does. */
static const double SAME_LEVEL = 0.1;

static double largest_voltage(const GArray *spans)
{
    double largest = 0;
    for (unsigned k = 0; k < spans->len; k++) largest = fmax(largest, fabs(span_at(spans, k)->voltage_v));
    return largest;
}

/* Voltages of one state, in order; returns how many. */
static unsigned voltages_of(const GArray *spans, RfFieldState state, double *voltage_v)
{
    unsigned n = 0;
    for (unsigned k = 0; k < spans->len; k++)
        if (span_at(spans, k)->state == state) voltage_v[n++] = span_at(spans, k)->voltage_v;
    qsort(voltage_v, n, sizeof *voltage_v, compare_doubles);
    return n;
}

/* Levels of one state, from the lowest voltage up; the last there is room for takes in all that is left. */
static size_t add_levels(const double *voltage_v, unsigned n, RfFieldState state, unsigned order,
                         double same_v, RfFieldLevel *levels, size_t at, size_t room)
{
    for (unsigned from = 0, to; from < n; from = to) {
        double sum = 0;
        bool is_last = at + 1 == room;
        for (to = from; to < n && (is_last || voltage_v[to] - voltage_v[from] <= same_v); to++)
            sum += voltage_v[to];
        levels[at++] = (RfFieldLevel){state, order, state == RF_FIELD_OFF ? 0 : sum / (to - from)};
    }
    return at;
}

size_t rf_field_log_levels(const GArray *spans, RfFieldLevel *levels, size_t n)
{
    RfFieldLevel states[RF_FIELD_STATES];
    g_autofree double *voltage_v = g_new(double, spans->len);
    double same_v = SAME_LEVEL * largest_voltage(spans);
    size_t at = 0;
    for (size_t s = 0; s < n; s++) states[s] = levels[s];
    for (unsigned k = 0; k < spans->len && n < RF_FIELD_STATES; k++) {
        bool is_known = false;
        for (size_t s = 0; s < n; s++) is_known |= states[s].state == span_at(spans, k)->state;
        if (is_known) continue;
        states[n] = (RfFieldLevel){span_at(spans, k)->state, (unsigned)n, 0};
        n++;
    }
    for (size_t s = 0; s < n; s++) {
        size_t room = RF_FIELD_LEVELS - (n - s - 1); /* the others need one each */
        unsigned count = voltages_of(spans, states[s].state, voltage_v);
        if (count == 0)
            levels[at++] = states[s];
        else
            at = add_levels(voltage_v, count, states[s].state, (unsigned)s, same_v, levels, at, room);
    }
    return at;
}

static void add_finding(RfFieldTimeline *timeline, RfLogFindingKind kind, double time_s, RfValue difference)
{
    RfLogFinding finding = {kind, time_s, difference};
    unsigned at = 0;
    while (at < timeline->findings->len &&
           g_array_index(timeline->findings, RfLogFinding, at).time_s <= time_s)
        at++;
    g_array_insert_val(timeline->findings, at, finding);
}

static void drop_findings(RfFieldTimeline *timeline, RfLogFindingKind kind)
{
    for (unsigned i = timeline->findings->len; i-- > 0;)
        if (g_array_index(timeline->findings, RfLogFinding, i).kind == kind)
            g_array_remove_index(timeline->findings, i);
}

static void note_pairs(RfFieldTimeline *timeline, const GArray *pairs)
{
    for (unsigned i = 0; i < pairs->len; i++) {
        const RfLogPair *pair = &g_array_index(pairs, RfLogPair, i);
        RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, pair->recording);
        s->has_log_time = true;
        s->log_time_s = pair->log_s.value;
        s->u_log_time_s = pair->log_s.sigma;
    }
}

/* Would the labels have told these spans from one another? */
static bool is_other_level(const RfLogSpan *a, const RfLogSpan *b, double largest_v)
{
    return a->state != b->state || fabs(a->voltage_v - b->voltage_v) > SAME_LEVEL * largest_v;
}

static bool is_paired(const GArray *pairs, unsigned log)
{
    for (unsigned i = 0; i < pairs->len; i++)
        if (g_array_index(pairs, RfLogPair, i).log == log) return true;
    return false;
}

/* Would the motion have shown this switch? Squared size of the expected change of speed over its variance, summed. */
static double power_to_see(const RfFieldRuns *runs, const RfStateDroplet *droplets, double time_s,
                           double change_v)
{
    double power = 0;
    size_t run = 0;
    while (run + 1 < runs->runs && runs->edge_s[run + 1] < time_s) run++;
    for (size_t j = 0; j < runs->droplets; j++) {
        const RfRunSpeed *seen = rf_field_runs_speed(runs, j, run);
        double w = droplets[j].speed_per_volt_m_s_v;
        if (seen->time_s < 1 || fabs(w) < 3 * droplets[j].u_speed_per_volt_m_s_v) continue;
        power += w * w * change_v * change_v / (4 * seen->variance_m2_s2);
    }
    return power;
}

/* A switch that only the log has is put in where nobody could see it, and left out where the motion denies it. */
static void insert_unseen(RfFieldTimeline *timeline, const RfLogSpan *span, const RfLogSpan *span_before,
                          double time_s)
{
    GArray *intervals = timeline->intervals;
    unsigned k = 0;
    while (k + 1 < intervals->len && g_array_index(intervals, RfFieldInterval, k).end_s < time_s) k++;
    RfFieldInterval after = g_array_index(intervals, RfFieldInterval, k);
    g_array_index(intervals, RfFieldInterval, k).end_s = after.start_s = time_s;
    g_array_insert_val(intervals, k + 1, after);
    RfFieldSwitch s = {.time_s = {time_s, hypot(span->u_start_s, timeline->log_offset_s.sigma)},
                       .from = span_before->state,
                       .to = span->state,
                       .change_v = span->voltage_v - span_before->voltage_v,
                       .has_log_time = true,
                       .log_time_s = span->start_s,
                       .u_log_time_s = span->u_start_s};
    g_array_insert_val(timeline->switches, k, s);
}

static void judge_unpaired(const GArray *spans, const GArray *pairs, const RfLogClock *clock,
                           const RfFieldRuns *runs, const RfStateDroplet *droplets, RfFieldTimeline *timeline)
{
    static const double plainly_visible = 30;
    double first_s = runs->edge_s[0], last_s = runs->edge_s[runs->runs], largest_v = largest_voltage(spans);
    for (unsigned k = 1; k < spans->len; k++) {
        double time_s = rf_log_clock_to_recording_s(clock, span_at(spans, k)->start_s);
        if (is_paired(pairs, k) || time_s < first_s + 0.2 || time_s > last_s - 0.2) continue;
        double change_v = span_at(spans, k)->voltage_v - span_at(spans, k - 1)->voltage_v;
        bool is_plain = is_other_level(span_at(spans, k), span_at(spans, k - 1), largest_v);
        bool is_denied = is_plain && power_to_see(runs, droplets, time_s, change_v) > plainly_visible;
        if (is_plain)
            add_finding(timeline, is_denied ? RF_LOG_EXTRA : RF_LOG_UNSEEN, time_s, (RfValue){0, 0});
        if (!is_denied) insert_unseen(timeline, span_at(spans, k), span_at(spans, k - 1), time_s);
    }
    for (unsigned k = 0; k < timeline->switches->len; k++) {
        const RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, k);
        if (!s->has_log_time) add_finding(timeline, RF_LOG_MISSING, s->time_s.value, (RfValue){0, 0});
    }
}

static const RfLogSpan *span_at_time(const GArray *spans, double log_s)
{
    unsigned k = 0;
    while (k + 1 < spans->len && span_at(spans, k)->end_s < log_s) k++;
    return span_at(spans, k);
}

/* Name and voltage of an interval between two edges on which log and motion agree come from the log. Where they don't,
 * the motion's name stays, with the voltage of the level that it was given. */
static void name_intervals(const GArray *spans, const RfLogClock *clock, RfFieldTimeline *timeline)
{
    GArray *intervals = timeline->intervals;
    for (unsigned k = 0; k < intervals->len; k++) {
        RfFieldInterval *v = &g_array_index(intervals, RfFieldInterval, k);
        const RfLogSpan *span =
            span_at_time(spans, rf_log_clock_from_recording_s(clock, 0.5 * (v->start_s + v->end_s)));
        bool from_log =
            (k == 0 || g_array_index(timeline->switches, RfFieldSwitch, k - 1).has_log_time) &&
            (k + 1 == intervals->len || g_array_index(timeline->switches, RfFieldSwitch, k).has_log_time);
        if (from_log) v->state = span->state;
        bool is_same = v->state == span->state && v->state != RF_FIELD_OFF;
        if (is_same)
            v->voltage_v = span->voltage_v;
        else if (v->state == RF_FIELD_OFF)
            v->voltage_v = 0; /* off is off: what the log shows there is its own zero */
    }
}

/* Neighbours of one name and voltage are one interval. */
static void merge_intervals(RfFieldTimeline *timeline)
{
    GArray *intervals = timeline->intervals;
    for (unsigned k = 0; k + 1 < intervals->len;) {
        RfFieldInterval *v = &g_array_index(intervals, RfFieldInterval, k);
        RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, k);
        s->from = v[0].state;
        s->to = v[1].state;
        s->change_v = v[1].voltage_v - v[0].voltage_v;
        if (s->from != s->to || fabs(s->change_v) > 1e-6) {
            k++;
            continue;
        }
        v->end_s = v[1].end_s;
        g_array_remove_index(intervals, k + 1);
        g_array_remove_index(timeline->switches, k);
    }
}

/* No droplet moved with the field, so nothing ties the clocks: they are taken as one where log and recording begin within
 * a second of each other, else as having their middles in common. Charges of nought don't mind. */
static void take_clocks_as_one(const GArray *spans, const RfFieldRuns *runs, RfFieldTimeline *timeline,
                               RfLogClock *clock)
{
    double first_s = runs->edge_s[0], last_s = runs->edge_s[runs->runs];
    double log_first_s = span_at(spans, 0)->start_s, log_last_s = span_at(spans, spans->len - 1)->end_s;
    double offset_s =
        fabs(log_first_s - first_s) > 1 ? 0.5 * (log_first_s + log_last_s - first_s - last_s) : 0;
    clock->offset_s = (RfValue){offset_s, (last_s - first_s) / sqrt(12)};
    add_finding(timeline, RF_LOG_UNTIED, first_s, clock->offset_s);
}

bool rf_field_log_apply(const GArray *spans, const RfFieldSheet *sheet, const RfFieldRuns *runs,
                        const RfStateDroplet *droplets, RfFieldTimeline *timeline, GError **error)
{
    g_autoptr(GArray) pairs = g_array_new(FALSE, TRUE, sizeof(RfLogPair));
    RfLogClock clock = {0};
    timeline->has_log = true;
    if (spans->len > 1 && timeline->switches->len == 0) {
        take_clocks_as_one(spans, runs, timeline, &clock);
    } else if (spans->len > 1) {
        if (!rf_log_clock_match(spans, timeline->switches, sheet->log_clock_reach_s, pairs)) {
            g_set_error(
                error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_SHAPE,
                "voltage log: %u switches, of which none fits the %u switches seen in the motion; need a log "
                "of the same recording",
                spans->len - 1, timeline->switches->len);
            return false;
        }
        rf_log_clock_fit(pairs, &clock);
    }
    timeline->log_offset_s = clock.offset_s;
    timeline->log_drift = clock.drift;
    note_pairs(timeline, pairs);
    judge_unpaired(spans, pairs, &clock, runs, droplets, timeline);
    name_intervals(spans, &clock, timeline);
    merge_intervals(timeline);
    return true;
}

static void audit_clock(RfFieldTimeline *timeline)
{
    g_autoptr(GArray) pairs = g_array_new(FALSE, TRUE, sizeof(RfLogPair));
    for (unsigned k = 0; k < timeline->switches->len; k++) {
        const RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, k);
        RfLogPair pair = {k, 0, s->time_s, {s->log_time_s, s->u_log_time_s}};
        if (s->has_log_time && s->droplets > 0) g_array_append_val(pairs, pair);
    }
    drop_findings(timeline, RF_LOG_LATE);
    if (pairs->len == 0) return;
    RfLogClock clock;
    rf_log_clock_fit(pairs, &clock);
    timeline->log_offset_s = clock.offset_s;
    timeline->log_drift = clock.drift;
    for (unsigned i = 0; i < pairs->len; i++) {
        const RfLogPair *p = &g_array_index(pairs, RfLogPair, i);
        double late = p->log_s.value - rf_log_clock_from_recording_s(&clock, p->recording_s.value);
        double u = hypot(hypot(p->log_s.sigma, p->recording_s.sigma), clock.offset_s.sigma);
        if (fabs(late) > 4 * u) add_finding(timeline, RF_LOG_LATE, p->recording_s.value, (RfValue){late, u});
    }
}

/* One witness's part in the voltage of an interval by its motion: weight and weighted voltage. */
static void weigh_voltage(const RfSwitchWitness *w, const RfFieldInterval *v, double *weight, double *sum)
{
    const RfSample *first = NULL, *last = NULL;
    size_t k = 0;
    for (size_t i = 0; i < w->trail->n; i++) {
        const RfSample *s = &w->trail->samples[i];
        if (s->time_s < v->start_s || s->time_s > v->end_s) continue;
        if (!first) first = s;
        last = s;
    }
    if (!first || last->time_s - first->time_s < 0.5) return;
    double middle_s = 0.5 * (first->time_s + last->time_s), watched_s = last->time_s - first->time_s;
    while (k + 1 < w->spells && middle_s >= w->spell_end_s[k]) k++;
    if (k > 0 && w->spell_end_s[k - 1] > first->time_s) return; /* its charge changed in between */
    if (k + 1 < w->spells && w->spell_end_s[k] < last->time_s) return;
    double per_volt = w->speed_per_volt_m_s_v[k], u = w->u_speed_per_volt_m_s_v[k] * v->voltage_v;
    double variance = 2 * w->noise.diffusion_m2_s / watched_s + u * u;
    *weight += per_volt * per_volt / variance;
    *sum += per_volt * ((last->fall_m - first->fall_m) / watched_s - w->fall_m_s) / variance;
}

static void audit_voltages(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n)
{
    drop_findings(timeline, RF_LOG_VOLTAGE_MISFIT);
    for (unsigned k = 0; k < timeline->intervals->len; k++) {
        const RfFieldInterval *v = &g_array_index(timeline->intervals, RfFieldInterval, k);
        double weight = 0, sum = 0;
        for (size_t j = 0; j < n; j++)
            if (witnesses[j].usable) weigh_voltage(&witnesses[j], v, &weight, &sum);
        if (!(weight > 0)) continue;
        double misfit = sum / weight - v->voltage_v, u = 1 / sqrt(weight);
        if (fabs(misfit) > 4 * u)
            add_finding(timeline, RF_LOG_VOLTAGE_MISFIT, 0.5 * (v->start_s + v->end_s), (RfValue){misfit, u});
    }
}

void rf_field_log_audit(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n)
{
    audit_clock(timeline);
    audit_voltages(timeline, witnesses, n);
}
