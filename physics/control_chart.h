/* A quantity followed over months: the control chart of individuals and moving ranges, and when it moved. Constants and
 * tests as in ISO 7870-2 (Shewhart charts, sigma from the mean moving range); average run lengths by the Markov chain of
 * Champ & Woodall 1987; the instant of a shift as Samuel, Pignatiello & Calvin 1998. Values in any one unit, in the
 * order of time. Not for where the values come from. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

enum {
    RF_CONTROL_CHART_RUN = 7,      /* points in a row on one side, or rising, or falling */
    RF_CONTROL_CHART_BASELINE = 8, /* fewer points give limits that say nothing */
};

typedef struct {
    size_t n;             /* points that centre comes from; 0: it is known */
    double centre, sigma; /* sigma: of one point, mean moving range over d2 */
    double lower, upper;  /* centre -+ 3 sigma */
    double mean_range, range_upper;
} RfControlLimits;

typedef enum {
    RF_CONTROL_BEYOND = 1 << 0, /* outside the limits */
    RF_CONTROL_RUN = 1 << 1,    /* the last of RF_CONTROL_CHART_RUN or more on one side of the centre */
    RF_CONTROL_TREND = 1 << 2,  /* the last of RF_CONTROL_CHART_RUN or more that rise, or fall */
    RF_CONTROL_RANGE = 1 << 3,  /* its moving range is above range_upper */
} RfControlSignal;

typedef struct {
    size_t first;    /* the first point after the shift */
    size_t from, to; /* first lies here with about 95 %: where the log-likelihood is within 2 of the best */
    double size, u_size;   /* of the shift, against the centre */
    double log_likelihood; /* of "it moved then" over "it never moved" */
} RfControlShift;

/* Limits from the first `n` points. False where n < RF_CONTROL_CHART_BASELINE or all points are the same. */
bool rf_control_chart_limits(const double *values, size_t n, RfControlLimits *limits);

/* Flags of RfControlSignal for each of n points; a run or trend is counted over all of them, and on after its signal. */
void rf_control_chart_signals(const RfControlLimits *limits, const double *values, size_t n,
                              unsigned *signals);

/* The most likely instant of a lasting shift before or at point `signal` (0 < signal < n), among the points from
 * `baseline` on where baseline > 0, else anywhere; the points up to `signal` are used, the centre with the uncertainty of its n points. */
RfControlShift rf_control_chart_shift(const RfControlLimits *limits, const double *values, size_t baseline,
                                      size_t signal);

/* Points until the first signal, on average, once the quantity has moved by `shift_sigmas`: limits and centre known, points
 * independent and normal. `with_runs`: RF_CONTROL_RUN counts beside RF_CONTROL_BEYOND. */
double rf_control_chart_run_length(double shift_sigmas, bool with_runs);
