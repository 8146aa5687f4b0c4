#include "physics/log_clock.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdlib.h>

/* Switches closer than this on a common clock may be the same one (a late relay, an interval between samples). */
static const double SAME_S = 0.5;

static const RfLogSpan *span_at(const GArray *spans, unsigned k)
{
    return &g_array_index(spans, RfLogSpan, k);
}

static const RfFieldSwitch *switch_at(const GArray *switches, unsigned k)
{
    return &g_array_index(switches, RfFieldSwitch, k);
}

/* To the same state, and the voltage changes the same way. */
static bool is_alike(const GArray *spans, unsigned j, const RfFieldSwitch *s)
{
    double change_v = span_at(spans, j)->voltage_v - span_at(spans, j - 1)->voltage_v;
    return span_at(spans, j)->state == s->to && change_v * s->change_v >= 0;
}

/* Pairs under an offset: each switch of the recording with the nearest of the log that is like it. */
static double pair_up(const GArray *spans, const GArray *switches, double offset_s, GArray *pairs)
{
    double score = 0;
    if (pairs) g_array_set_size(pairs, 0);
    for (unsigned k = 0; k < switches->len; k++) {
        const RfFieldSwitch *s = switch_at(switches, k);
        unsigned nearest = 0;
        double closest = SAME_S;
        for (unsigned j = 1; j < spans->len; j++) {
            double apart = fabs(span_at(spans, j)->start_s - offset_s - s->time_s.value);
            if (apart >= closest || !is_alike(spans, j, s)) continue;
            closest = apart;
            nearest = j;
        }
        if (nearest == 0) continue;
        score += 1 - (closest / SAME_S) * (closest / SAME_S);
        const RfLogSpan *span = span_at(spans, nearest);
        RfLogPair pair = {k, nearest, s->time_s, {span->start_s, span->u_start_s}};
        if (pairs) g_array_append_val(pairs, pair);
    }
    return score;
}

static double misfit(const RfLogClock *clock, const RfLogPair *pair)
{
    return pair->log_s.value - rf_log_clock_from_recording_s(clock, pair->recording_s.value);
}

/* Chance of the pair's difference under a clock: a rectangle smeared by the recording's Gaussian, or an outlier anywhere
 * within the second in which pairs are sought. */
static double log_chance(const RfLogClock *clock, const RfLogPair *pair)
{
    static const double outlier_share = 1e-3;
    double half_s = sqrt(3) * pair->log_s.sigma, sigma_s = fmax(pair->recording_s.sigma, 1e-5);
    double miss_s = misfit(clock, pair), within;
    if (half_s > 1e-3 * sigma_s)
        within = (gsl_cdf_ugaussian_P((miss_s + half_s) / sigma_s) -
                  gsl_cdf_ugaussian_P((miss_s - half_s) / sigma_s)) /
                 (2 * half_s);
    else
        within = gsl_ran_ugaussian_pdf(miss_s / sigma_s) / sigma_s;
    return log((1 - outlier_share) * within + outlier_share / (2 * SAME_S));
}

enum { GRID = 81 };

/* Where a parameter of the clock is sought. */
typedef struct {
    double middle, half; /* half 0: held */
} Range;

static double range_at(const Range *range, int i)
{
    return range->middle + range->half * (2.0 * i / (GRID - 1) - 1);
}

static double log_likelihood(const GArray *pairs, const RfLogClock *clock)
{
    double sum = 0;
    for (unsigned i = 0; i < pairs->len; i++) sum += log_chance(clock, &g_array_index(pairs, RfLogPair, i));
    return sum;
}

/* Mean and spread of both parameters over the ranges. */
static void weigh_clocks(const GArray *pairs, const Range *offset, const Range *drift, RfLogClock *clock)
{
    int drifts = drift->half > 0 ? GRID : 1;
    g_autofree double *value = g_new(double, GRID *drifts);
    double top = -HUGE_VAL, sum[5] = {0};
    RfLogClock at = *clock;
    for (int i = 0; i < GRID * drifts; i++) {
        at.offset_s.value = range_at(offset, i % GRID);
        at.drift.value = drifts > 1 ? range_at(drift, i / GRID) : drift->middle;
        value[i] = log_likelihood(pairs, &at);
        top = fmax(top, value[i]);
    }
    for (int i = 0; i < GRID * drifts; i++) {
        double w = exp(value[i] - top), o = range_at(offset, i % GRID) - offset->middle;
        double d = drifts > 1 ? range_at(drift, i / GRID) - drift->middle : 0;
        const double terms[5] = {w, w * o, w * o * o, w * d, w * d * d};
        for (int k = 0; k < 5; k++) sum[k] += terms[k];
    }
    double o = sum[1] / sum[0], d = sum[3] / sum[0];
    clock->offset_s = (RfValue){offset->middle + o, sqrt(fmax(sum[2] / sum[0] - o * o, 0))};
    clock->drift = (RfValue){drift->middle + d, sqrt(fmax(sum[4] / sum[0] - d * d, 0))};
}

/* Ranges close in on the likelihood until they hold six of its sigmas on either side. */
static void home_in(const GArray *pairs, Range offset, Range drift, RfLogClock *clock)
{
    for (int pass = 0; pass < 3; pass++) {
        weigh_clocks(pairs, &offset, &drift, clock);
        offset = (Range){clock->offset_s.value, fmax(6 * clock->offset_s.sigma, offset.half / 15)};
        drift = (Range){clock->drift.value, fmax(6 * clock->drift.sigma, drift.half / 15)};
    }
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median_difference(const GArray *pairs)
{
    g_autofree double *d = g_new(double, pairs->len);
    for (unsigned i = 0; i < pairs->len; i++) {
        const RfLogPair *p = &g_array_index(pairs, RfLogPair, i);
        d[i] = p->log_s.value - p->recording_s.value;
    }
    qsort(d, pairs->len, sizeof *d, compare_doubles);
    return d[pairs->len / 2];
}

static double largest_u_s(const GArray *pairs)
{
    double largest = 1e-3;
    for (unsigned i = 0; i < pairs->len; i++) {
        const RfLogPair *p = &g_array_index(pairs, RfLogPair, i);
        largest = fmax(largest, hypot(p->log_s.sigma, p->recording_s.sigma));
    }
    return largest;
}

void rf_log_clock_fit(const GArray *pairs, RfLogClock *clock)
{
    const RfLogPair *first = &g_array_index(pairs, RfLogPair, 0), *last = first + pairs->len - 1;
    double span_s = last->recording_s.value - first->recording_s.value, reach_s = 6 * largest_u_s(pairs);
    *clock = (RfLogClock){.pivot_s = first->recording_s.value + 0.5 * span_s};
    Range offset = {median_difference(pairs), reach_s}, drift = {0, 0};
    home_in(pairs, offset, drift, clock);
    if (pairs->len < 4 || !(span_s > 0)) return;
    RfLogClock drifting = *clock;
    drift.half = 2 * reach_s / span_s;
    home_in(pairs, offset, drift, &drifting);
    if (fabs(drifting.drift.value) > 4 * drifting.drift.sigma) *clock = drifting;
}

static double best_offset(const GArray *spans, const GArray *switches, double reach_s, double *best_score)
{
    double best = 0;
    *best_score = 0;
    for (unsigned k = 0; k < switches->len; k++)
        for (unsigned j = 1; j < spans->len; j++) {
            double offset = span_at(spans, j)->start_s - switch_at(switches, k)->time_s.value;
            if (reach_s > 0 && fabs(offset) > reach_s) continue;
            double score = pair_up(spans, switches, offset, NULL);
            bool is_better = score > *best_score + 1e-6;
            bool is_nearer = fabs(score - *best_score) <= 1e-6 && fabs(offset) < fabs(best);
            if (!is_better && !is_nearer) continue;
            *best_score = fmax(score, *best_score);
            best = offset;
        }
    return best;
}

bool rf_log_clock_match(const GArray *spans, const GArray *switches, double reach_s, GArray *pairs)
{
    double score, offset = best_offset(spans, switches, reach_s, &score);
    g_array_set_size(pairs, 0);
    if (!(score > 0)) return false;
    pair_up(spans, switches, offset, pairs);
    RfLogClock clock;
    rf_log_clock_fit(pairs, &clock);
    pair_up(spans, switches, clock.offset_s.value, pairs);
    return pairs->len > 0;
}

double rf_log_clock_to_recording_s(const RfLogClock *clock, double log_s)
{
    double apart = log_s - clock->offset_s.value - clock->pivot_s;
    return clock->pivot_s + apart / (1 + clock->drift.value);
}

double rf_log_clock_from_recording_s(const RfLogClock *clock, double recording_s)
{
    return recording_s + clock->offset_s.value + clock->drift.value * (recording_s - clock->pivot_s);
}
