/* How the clock of a voltage log stands against the recording's.
 * Not for what to do with disagreements (field_timeline.c). */
#pragma once

#include <glib.h>

#include "physics/field_timeline.h"

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

/* Clock from pairs (at least one): mean and spread of the likelihood. A log tells between which two samples its voltage
 * changed, so its times are rectangular, of half-width sqrt(3) sigma; the recording's are Gaussian. The edges of the
 * rectangles fix the offset far better than their middles would. One pair in a thousand may be anywhere. */
void rf_log_clock_fit(const GArray *pairs, RfLogClock *clock);
double rf_log_clock_to_recording_s(const RfLogClock *clock, double log_s);
double rf_log_clock_from_recording_s(const RfLogClock *clock, double recording_s);
