/* A voltage log as a list of states on its own clock, and how that clock stands against the recording's.
 * Not for what to do with disagreements (field_timeline.c). */
#pragma once

#include <glib.h>

#include "physics/field_timeline.h"

typedef struct {
    double start_s,
        end_s;        /* log clock; neighbours touch halfway between the samples on either side of a switch */
    double u_start_s; /* of its start: the distance of those samples over sqrt(12); 0 for the first */
    RfFieldState state;
    double voltage_v; /* mean of its samples, the ones next to a switch left out where there are enough */
} RfLogSpan;

/* A sample counts as on above half of the largest |voltage| in the log. Samples in time order.
 *   returns new array of RfLogSpan, or NULL with error */
GArray *rf_log_clock_spans(const double *time_s, const double *voltage_v, size_t n, GError **error);

/* One switch of the recording beside one of the log. */
typedef struct {
    unsigned recording, log; /* numbers of the switches; log: of the span that begins there */
    RfValue recording_s, log_s;
} RfLogPair;

typedef struct {
    RfValue offset_s; /* log clock less recording clock at pivot_s of the recording */
    RfValue drift;    /* rate of the log's clock less 1; 0 where not significant (4 sigma) */
    double pivot_s;
} RfLogClock;

/* Pairs switches by time pattern and states; false where nothing fits. reach_s: largest |offset|, 0: any.
 *   pairs    of RfLogPair, emptied first */
bool rf_log_clock_match(const GArray *spans, const GArray *switches, double reach_s, GArray *pairs);

/* Clock from pairs (at least one); a pair that is off counts no more than one off by 4 sigma would. */
void rf_log_clock_fit(const GArray *pairs, RfLogClock *clock);
double rf_log_clock_to_recording_s(const RfLogClock *clock, double log_s);
double rf_log_clock_from_recording_s(const RfLogClock *clock, double recording_s);
