#include "physics/log_clock.h"

#include <math.h>
#include <stdlib.h>

#include "physics/physics_error.h"

/* Switches closer than this on a common clock may be the same one (a late relay, an interval between samples). */
static const double SAME_S = 0.5;

static RfFieldState state_of(double voltage_v, double threshold_v)
{
    if (voltage_v > threshold_v) return RF_FIELD_TOP_PLUS;
    return voltage_v < -threshold_v ? RF_FIELD_TOP_MINUS : RF_FIELD_OFF;
}

static double span_voltage(const double *voltage_v, size_t first, size_t end)
{
    double sum = 0;
    if (end - first > 4) {
        first++;
        end--;
    }
    for (size_t i = first; i < end; i++) sum += voltage_v[i];
    return sum / (double)(end - first);
}

static bool check_log(const double *time_s, const double *voltage_v, size_t n, GError **error)
{
    for (size_t i = 0; i < n; i++) {
        bool ascends = i == 0 || time_s[i] > time_s[i - 1];
        if (isfinite(time_s[i]) && isfinite(voltage_v[i]) && ascends) continue;
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                    "voltage log: sample %zu at %g s, %g V; need finite numbers and ascending times", i + 1,
                    time_s[i], voltage_v[i]);
        return false;
    }
    if (n >= 2) return true;
    g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_TOO_FEW,
                "voltage log: %zu samples; need at least 2", n);
    return false;
}

GArray *rf_log_clock_spans(const double *time_s, const double *voltage_v, size_t n, GError **error)
{
    if (!check_log(time_s, voltage_v, n, error)) return NULL;
    GArray *spans = g_array_new(FALSE, TRUE, sizeof(RfLogSpan));
    double largest = 0, start_s = time_s[0], u_start_s = 0;
    for (size_t i = 0; i < n; i++) largest = fmax(largest, fabs(voltage_v[i]));
    double threshold = fmax(0.5 * largest, 1); /* a log without any field is noise about zero */
    size_t first = 0;
    for (size_t i = 1; i <= n; i++) {
        RfFieldState state = state_of(voltage_v[first], threshold);
        if (i < n && state_of(voltage_v[i], threshold) == state) continue;
        double end_s = i < n ? 0.5 * (time_s[i - 1] + time_s[i]) : time_s[n - 1];
        RfLogSpan span = {start_s, end_s, u_start_s, state, span_voltage(voltage_v, first, i)};
        g_array_append_val(spans, span);
        u_start_s = i < n ? (time_s[i] - time_s[i - 1]) / sqrt(12) : 0;
        start_s = end_s;
        first = i;
    }
    return spans;
}

static const RfLogSpan *span_at(const GArray *spans, unsigned k)
{
    return &g_array_index(spans, RfLogSpan, k);
}

static const RfFieldSwitch *switch_at(const GArray *switches, unsigned k)
{
    return &g_array_index(switches, RfFieldSwitch, k);
}

/* Pairs under an offset: each switch of the recording with the nearest of the log that leads to the same state. */
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
            if (apart >= closest || span_at(spans, j)->state != s->to) continue;
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

static void fit_line(const GArray *pairs, bool with_drift, RfLogClock *clock)
{
    double w0 = 0, w1 = 0, w2 = 0, d0 = 0, d1 = 0;
    for (unsigned i = 0; i < pairs->len; i++) {
        const RfLogPair *p = &g_array_index(pairs, RfLogPair, i);
        double t = p->recording_s.value - clock->pivot_s, difference = p->log_s.value - p->recording_s.value;
        double variance =
            p->log_s.sigma * p->log_s.sigma + p->recording_s.sigma * p->recording_s.sigma + 1e-12;
        double weight = 1 / variance, far = fabs(misfit(clock, p)) * sqrt(weight) / 4;
        if (far > 1) weight /= far * far;
        w0 += weight;
        w1 += weight * t;
        w2 += weight * t * t;
        d0 += weight * difference;
        d1 += weight * difference * t;
    }
    double det = w0 * w2 - w1 * w1;
    if (with_drift && det > 1e-9 * w0 * w2) {
        clock->offset_s = (RfValue){(d0 * w2 - d1 * w1) / det, sqrt(w2 / det)};
        clock->drift = (RfValue){(d1 * w0 - d0 * w1) / det, sqrt(w0 / det)};
    } else {
        clock->offset_s = (RfValue){d0 / w0, 1 / sqrt(w0)};
        clock->drift = (RfValue){0, 0};
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

void rf_log_clock_fit(const GArray *pairs, RfLogClock *clock)
{
    enum { ROUNDS = 20 };
    const RfLogPair *first = &g_array_index(pairs, RfLogPair, 0), *last = first + pairs->len - 1;
    *clock = (RfLogClock){.pivot_s = 0.5 * (first->recording_s.value + last->recording_s.value)};
    clock->offset_s.value = median_difference(pairs);
    RfLogClock steady = *clock;
    for (int round = 0; round < ROUNDS; round++) fit_line(pairs, false, &steady);
    *clock = steady;
    if (pairs->len < 4) return;
    for (int round = 0; round < ROUNDS; round++) fit_line(pairs, true, clock);
    if (fabs(clock->drift.value) <= 4 * clock->drift.sigma) *clock = steady;
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
